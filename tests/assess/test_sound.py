"""Both directions of a call side by side on the capture's clock."""

from pathlib import Path

import numpy as np
import pytest

import rtpaudit
from tests.craft import START_NS, A, B, ethernet, ipv4, pcap, rtp, udp

SECONDS = 120
CLICK = 0x80
"""the octet of PCMU whose sample is the largest"""


def way(there: bool, skew_ppm: float, begin_s: float) -> list[tuple[int, bytes]]:
    """A quiet direction with a click every ten seconds of the sender's time."""
    rows = []
    for n in range(SECONDS * 50):
        payload = bytes([CLICK]) + bytes([0x7F, 0xF0]) * 79 + b"\xff" if n % 500 == 250 else bytes([0x7F, 0xF0]) * 80
        at = START_NS + round((begin_s + 0.02 * n / (1 + skew_ppm * 1e-6)) * 1e9)
        datagram = udp(rtp(payload, n, 160 * n, ssrc=there + 1), *((4000, 4002) if there else (4002, 4000)))
        rows.append((at, ethernet(ipv4(datagram, *((A, B) if there else (B, A))))))
    return rows


def clicks(skew_ppm: float, begin_s: float) -> np.ndarray:
    return begin_s + (np.arange(SECONDS // 10) * 10 + 5) / (1 + skew_ppm * 1e-6)


@pytest.mark.parametrize("skews_ppm", [(200, -200), (-200, 200), (0, 200)])
def test_both_sides_keep_to_the_captures_clock_whatever_their_own_do(
    tmp_path: Path, skews_ppm: tuple[float, float]
) -> None:
    rows = sorted(way(True, skews_ppm[0], 0.0) + way(False, skews_ppm[1], 0.5))
    capture = tmp_path / "skewed.pcap"
    capture.write_bytes(pcap([frame for _, frame in rows], [at for at, _ in rows], nanoseconds=True))
    audit = rtpaudit.audit(capture)
    assert audit.streams.clock_skew_ppm.tolist() == pytest.approx(list(skews_ppm), abs=0.1)
    both, rate_hz = audit.sound.both(audit.assessment.calls[0])
    for side, begin_s in ((0, 0.0), (1, 0.5)):
        heard = np.flatnonzero(both[:, side] > 30_000) / rate_hz
        assert heard == pytest.approx(clicks(skews_ppm[side], begin_s), abs=0.001)
