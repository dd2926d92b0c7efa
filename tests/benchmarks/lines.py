"""A capture of many two-way G.711 calls, made row by row of streams so that making it takes less time than reading."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import soundfile

from rtpaudit.codecs.g711 import encode_pcmu
from tests.benchmarks.dialogs import closing, opening
from tests.craft import ethernet, ipv4, pcap, rtp, udp

AUDIO = Path(__file__).parents[2] / "fixtures" / "audio"
START_NS = 1_772_534_400_000_000_000
RECORD = 16 + 14 + 20 + 8 + 12 + 160


def make_capture(
    path: Path, calls: int = 100, seconds: float = 180.0, loss: float = 0.002, seed: int = 1, dialogs: bool = False
) -> int:
    """Write a pcap of ``calls`` two-way PCMU calls side by side, 20 ms a packet; returns the number of RTP packets.

    With ``dialogs`` each of them is set up and ended by SIP.
    """
    draw = np.random.default_rng(seed)
    voices = [encode_pcmu(soundfile.read(AUDIO / name, dtype="int16")[0]) for name in ("desk.wav", "guest.wav")]
    streams, steps = 2 * calls, int(seconds * 50)
    heads = np.stack([_record(number) for number in range(streams)])
    first = draw.integers(0, 65536, streams)
    ticks = draw.integers(0, 2**32, streams)
    spread_ns = np.sort(draw.integers(0, 19_000_000, streams))
    packets = 0
    with open(path, "wb") as file:
        file.write(pcap([]))
        if dialogs:
            file.write(_messages(calls, opening, START_NS - 2_000_000_000))
        for k in range(steps):
            rows = heads.copy()
            at = START_NS + k * 20_000_000 + spread_ns + draw.integers(0, 90_000, streams)
            _put(rows, 0, at // 1_000_000_000, "<u4")
            _put(rows, 4, at % 1_000_000_000 // 1000, "<u4")
            _put(rows, 60, (first + k) & 0xFFFF, ">u2")
            _put(rows, 62, (ticks + 160 * k) & 0xFFFFFFFF, ">u4")
            for side, voice in enumerate(voices):
                offset = 160 * k % (len(voice) - 160)
                rows[side::2, 70:] = voice[offset : offset + 160]
            rows = rows[draw.random(streams) >= loss]
            file.write(rows.tobytes())
            packets += len(rows)
        if dialogs:
            file.write(_messages(calls, closing, START_NS + steps * 20_000_000))
    return packets


def _messages(calls: int, made: Callable[..., list[tuple[int, bytes]]], at_ns: int) -> bytes:
    """Records of one part of all dialogs by time; the calls begin within a second."""
    rows = [row for call in range(calls) for row in made(call, _ends(call), at_ns + call * 1_000_000_000 // calls)]
    return b"".join(record for _, record in sorted(rows, key=lambda row: row[0]))


def _ends(call: int) -> list[tuple[str, int]]:
    """Address and port of both sides of a call."""
    return [
        (f"192.0.2.{call % 250 + 1}", 16_384 + 2 * call % 49_000),
        (f"198.51.100.{call % 250 + 1}", 16_384 + (13_616 + 2 * call) % 49_000),
    ]


def _record(number: int) -> np.ndarray:
    call, side = divmod(number, 2)
    (source, source_port), (destination, destination_port) = _ends(call) if side == 0 else _ends(call)[::-1]
    packet = rtp(bytes(160), ssrc=0x0A000000 + number)
    frame = ethernet(ipv4(udp(packet, source_port, destination_port), source, destination, dscp=46))
    return np.frombuffer(pcap([frame])[24:], np.uint8).copy()


def _put(rows: np.ndarray, at: int, values: np.ndarray, dtype: str) -> None:
    octets = values.astype(dtype)[:, None].view(np.uint8)
    rows[:, at : at + octets.shape[1]] = octets
