"""Whole audits of captures cut and damaged anywhere: what came before is counted, and nothing grows without bound."""

import gzip
import random
import struct
from collections import Counter
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import numpy as np
import pytest

import rtpaudit
from rtpaudit.columns import TABLES
from rtpaudit.errors import UnreadableCapture
from rtpaudit.metrics.windows import MOST_WINDOWS

CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"
SMALL = ("busy-486.a.pcap", "no-rtp-dns-two-interfaces.pcapng", "sip-tcp-split-segments.pcap")
LARGE = ("pcmu-dtmf-two-way.pcap", "pcmu-sip-udp-one-way.pcap", "rtp-g722.b.pcap", "dtmf-rfc4733.b-any-sll.pcap",
         "edited-one-interface.pcapng", "srtp-sdes.b.pcap")  # fmt: skip
OTHERS = ("combo-two-segments.b.pcap", "hold-resume.a.pcap", "jitter-normal10.b.pcap", "proxy-two-legs.mon.pcap",
          "rtp-pcma-20-rtcp.b.pcap", "sip-tcp.a.pcap", "xr-loss3.a.pcap")  # fmt: skip
SURE = 12
"""packets of a stream that leave no doubt that it is one"""
MOST_DAMAGE_ROWS = 300
Key = tuple[str, int, str, int, str]


@cache
def octets_of(name: str) -> bytes:
    return (CAPTURES / name).read_bytes()


def ends(capture: bytes) -> list[int]:
    """Octet behind the record of each frame, by the formats' own lengths."""
    found, at = [], 0
    if capture[:4] == b"\n\r\r\n":
        while at < len(capture):
            kind, length = struct.unpack_from("<II", capture, at)
            at += length
            if kind == 6:
                found.append(at)
        return found
    at = 24
    while at < len(capture):
        at += 16 + struct.unpack_from("<I", capture, at + 8)[0]
        found.append(at)
    return found


@cache
def whole(name: str) -> tuple[list[int], dict[Key, np.ndarray], int]:
    """Ends of the records, the octet at which each packet of each stream is in the capture, and messages in all."""
    audit = rtpaudit.audit(CAPTURES / name)
    behind = np.array(ends(octets_of(name)))
    streams: dict[Key, list[np.ndarray]] = {}
    for one in audit.assessment.streams:
        streams.setdefault(key_of(one.stream), []).append(behind[one.stream.packets.frame - 1])
    return behind.tolist(), {key: np.concatenate(parts) for key, parts in streams.items()}, len(audit.signalling)


def key_of(stream) -> Key:
    return stream.source, stream.source_port, stream.destination, stream.destination_port, f"0x{stream.ssrc:08x}"


def audited(path: Path, octets: bytes) -> rtpaudit.Audit | None:
    """The audit with all its tables; None where the capture was refused in one sentence that names it."""
    path.write_bytes(octets)
    audit, sentence = None, ""
    try:
        audit = rtpaudit.audit(path)
    except UnreadableCapture as refusal:
        sentence = str(refusal)
    if audit is None:
        assert path.name in sentence
        assert "\n" not in sentence
    else:
        assert set(audit.tables) == set(TABLES)
    return audit


def counted(audit: rtpaudit.Audit | None) -> Counter[Key]:
    found: Counter[Key] = Counter()
    for one in audit.assessment.streams if audit else ():
        found[key_of(one.stream)] += one.figures.packets_captured
    return found


def check_cut(path: Path, name: str, cut: int) -> None:
    _, streams, messages = whole(name)
    audit = audited(path, octets_of(name)[:cut])
    found = counted(audit)
    for key, behind in streams.items():
        before = int((behind <= cut).sum())
        if before >= SURE:
            # The record that the cut goes through may hold a header yet.
            assert before <= found[key] <= before + 1
    if audit is not None:
        assert len(audit.signalling) <= messages
        check_bounds(audit)


def check_bounds(audit: rtpaudit.Audit) -> None:
    packets = sum(one.figures.packets_captured for one in audit.assessment.streams)
    assert len(audit.damage) <= MOST_DAMAGE_ROWS
    assert len(audit.gaps) <= packets
    assert len(audit.windows) <= MOST_WINDOWS * len(audit.streams)
    for one in audit.assessment.streams:
        if not audit.sound.why_silent(one.id):
            seconds = float(np.ptp(one.stream.packets.time_ns)) / 1e9
            assert len(audit.samples(one.id)) <= (1.05 * seconds + 15) * one.stream.sampling_rate_hz


def cuts(name: str, count: int) -> Iterator[int]:
    """Octets to cut at: evenly over the capture, none of them at the same place of a record."""
    size = len(octets_of(name))
    draw = random.Random(name)
    for number in range(count):
        yield min(size, number * size // count + draw.randrange(max(size // count, 1)))


def damaged(capture: bytes, at: int, draw: random.Random) -> bytes:
    """The capture with something wrong at an octet and further on."""
    size = draw.choice([1, 2, 4, 16, 40, 300, 5000])
    noise = draw.choice([draw.randbytes(size), bytes(size), b"\xff" * size, capture[:size]])
    how = draw.choice(["over", "insert", "remove", "flip", "repeat"])
    if how == "over":
        return capture[:at] + noise + capture[at + len(noise) :]
    if how == "insert":
        return capture[:at] + noise + capture[at:]
    if how == "remove":
        return capture[:at] + capture[at + size :]
    if how == "repeat":
        return capture[:at] + capture[max(at - size, 0) : at] * draw.choice([1, 3]) + capture[at:]
    flipped = bytearray(capture)
    for _ in range(draw.choice([1, 8, 64])):
        flipped[draw.randrange(at, len(capture))] ^= 1 << draw.randrange(8)
    return bytes(flipped)


def check_damage(path: Path, name: str, draw: random.Random) -> None:
    behind, streams, _ = whole(name)
    at = draw.randrange(28, len(octets_of(name)))
    audit = audited(path, damaged(octets_of(name), at, draw))
    # The frame in front of the damage may end elsewhere where the next header no longer bears it out.
    intact = max((end for end in behind if end <= at), default=0)
    found = counted(audit)
    for key, ended in streams.items():
        before = int((ended < intact).sum())
        if before >= SURE:
            assert found[key] >= before
    if audit is not None:
        check_bounds(audit)


@pytest.mark.parametrize("name", SMALL)
def test_a_small_capture_may_end_anywhere(tmp_path: Path, name: str) -> None:
    for cut in range(0, len(octets_of(name)), max(len(octets_of(name)) // 150, 1)):
        check_cut(tmp_path / "cut", name, cut)


@pytest.mark.parametrize("name", LARGE)
def test_every_packet_before_a_cut_is_counted(tmp_path: Path, name: str) -> None:
    for cut in cuts(name, 6):
        check_cut(tmp_path / "cut", name, cut)


@pytest.mark.parametrize("name", SMALL)
def test_no_damage_of_a_small_capture_ends_in_a_traceback(tmp_path: Path, name: str) -> None:
    for seed in range(100):
        check_damage(tmp_path / "damaged", name, random.Random(f"{name} {seed}"))


@pytest.mark.parametrize("name", LARGE)
def test_every_packet_before_damage_is_counted(tmp_path: Path, name: str) -> None:
    for seed in range(6):
        check_damage(tmp_path / "damaged", name, random.Random(f"{name} {seed}"))


@pytest.mark.parametrize("name", ["pcmu-dtmf-two-way.pcap"])
def test_a_compressed_capture_may_end_anywhere(tmp_path: Path, name: str) -> None:
    packed = gzip.compress(octets_of(name), 1)
    last = 0
    for cut in range(0, len(packed), len(packed) // 8):
        now = sum(counted(audited(tmp_path / "cut.gz", packed[:cut])).values())
        assert now >= last
        last = now
    assert last > 0


def test_a_damaged_capture_is_written_and_sounds(tmp_path: Path) -> None:
    name = "pcmu-dtmf-two-way.pcap"
    audit = audited(tmp_path / "damaged", damaged(octets_of(name), 60_000, random.Random(3)))
    assert audit is not None
    audit.write(tmp_path / "out")
    assert (tmp_path / "out" / "damage.csv").read_text().count("\n") == 1 + len(audit.damage)


@pytest.mark.thorough
@pytest.mark.parametrize("name", SMALL + LARGE + OTHERS)
def test_many_more_cuts(tmp_path: Path, name: str) -> None:
    for cut in cuts(name, 1000 if name in SMALL else 40):
        check_cut(tmp_path / "cut", name, cut)


@pytest.mark.thorough
@pytest.mark.parametrize("name", SMALL + LARGE + OTHERS)
def test_much_more_damage(tmp_path: Path, name: str) -> None:
    for seed in range(1000 if name in SMALL else 40):
        check_damage(tmp_path / "damaged", name, random.Random(f"{name} more {seed}"))
