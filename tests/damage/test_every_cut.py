"""Captures cut and damaged anywhere: all that came before is still told, and nothing but a sentence is raised."""

import gzip
import lzma
import struct
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rtpaudit.errors import UnreadableCapture
from tests.capture.reading import Reading, read, read_file
from tests.craft import (
    pcap,
    pcapng,
    pcapng_block,
    pcapng_enhanced,
    pcapng_interface,
    pcapng_obsolete,
    pcapng_section,
    pcapng_simple,
    pcapng_statistics,
    rtp_frame,
)

FRAMES = [rtp_frame(number) for number in range(12)]


def mixed(big: bool) -> bytes:
    """A pcapng file with something of everything."""
    order = ">" if big else "<"
    options = [(2, b"eth0"), (9, b"\x09"), (14, struct.pack(order + "q", 5))]
    parts = [pcapng_section(big), pcapng_interface(options=options, big_endian=big), pcapng_interface(113, 96, (), big)]
    parts += [pcapng_block(4, b"names are passed over", big), pcapng_simple(FRAMES[0], big_endian=big)]
    for number, frame in enumerate(FRAMES[1:5]):
        parts.append(pcapng_enhanced(frame, number, number % 2, options=[(4, bytes(8))], big_endian=big))
    return b"".join([*parts, pcapng_obsolete(FRAMES[5], 9, 1, 3, big), pcapng_statistics(0, 9, 1, big)])


MADE = {
    "pcap": pcap(FRAMES[:6]),
    "pcap, big-endian": pcap(FRAMES[:6], nanoseconds=True, big_endian=True),
    "pcapng": pcapng(FRAMES[:6]),
    "pcapng, mixed": mixed(False) + mixed(True),
}
EACH = pytest.mark.parametrize("name", MADE)


@EACH
def test_every_cut_gives_the_frames_before_it(name: str) -> None:
    capture = MADE[name]
    whole = read(capture)
    for cut in range(28, len(capture)):
        reading = read(capture[:cut])
        octets = [frame for frame in reading.octets if frame]
        # The last frame may be the beginning of one.
        assert octets[:-1] == whole.octets[: max(len(octets) - 1, 0)]
        assert not octets or whole.octets[len(octets) - 1].startswith(octets[-1])


@pytest.mark.parametrize("pack", [bytes, gzip.compress, lzma.compress], ids=["plain", "gzip", "xz"])
@EACH
def test_every_cut_file_is_read_or_refused_in_a_sentence(
    tmp_path: Path, name: str, pack: Callable[[bytes], bytes]
) -> None:
    packed = pack(MADE[name])
    path = tmp_path / "cut"
    last = 0
    sentences = []
    for cut in range(0, len(packed), max(len(packed) // 60, 1)):
        path.write_bytes(packed[:cut])
        try:
            now = len(read_file(path).frames)
        except UnreadableCapture as refusal:
            sentences.append(str(refusal))
            now = 0
        assert now >= last
        last = now
    assert last > 0
    assert all(str(path) in sentence for sentence in sentences)


def intact(capture: bytes, damaged_from: int) -> int:
    """Frames that lie whole before an octet."""
    whole = read(capture)
    return sum(1 for end in ends(capture, whole) if end <= damaged_from)


def ends(capture: bytes, reading: Reading) -> list[int]:
    found, at = [], 0
    for octets in reading.octets:
        at = capture.index(octets, at) + len(octets)
        found.append(at)
    return found


@EACH
@settings(max_examples=150, suppress_health_check=[HealthCheck.too_slow], deadline=2000)
@given(chance=st.data())
def test_damage_loses_nothing_before_it(name: str, chance: st.DataObject) -> None:
    capture = bytearray(MADE[name])
    at = chance.draw(st.integers(28, len(capture) - 1))
    wrong = chance.draw(st.binary(min_size=1, max_size=40))
    how = chance.draw(st.sampled_from(["overwrite", "insert", "remove"]))
    capture[at : at + (0 if how == "insert" else len(wrong))] = b"" if how == "remove" else wrong
    before = intact(MADE[name], at)
    # The frame in front of the damage may end early or late where the next header no longer bears it out.
    kept = max(before - 1, 0)
    assert read(bytes(capture)).octets[:kept] == read(MADE[name]).octets[:kept]
    assert len(read(bytes(capture)).octets) >= before


@EACH
@settings(max_examples=100, deadline=2000)
@given(noise=st.binary(max_size=3000))
def test_noise_behind_a_good_header_ends(name: str, noise: bytes) -> None:
    capture = MADE[name][:60] + noise
    reading = read(capture)
    assert len(reading.damage) <= 104
    assert sum(len(octets) for octets in reading.octets) <= len(capture)


@settings(max_examples=60, deadline=2000)
@given(words=st.lists(st.sampled_from([0, 1, 2, 3, 5, 6, 12, 16, 20, 28, 32, 0x0A0D0D0A, 0x1A2B3C4D, 2**32 - 1])))
def test_words_that_mean_something_in_any_order_end(words: list[int]) -> None:
    for start in MADE.values():
        read(start[:60] + struct.pack(f"<{len(words)}I", *words))
        read(start[:60] + struct.pack(f">{len(words)}I", *words))


@pytest.mark.parametrize("filler", [b"\0", b"\xff", b"\x06\0\0\0\x20\0\0\0", pcapng_section(), pcapng_interface()])
def test_megabytes_of_one_thing_are_read_in_little_time(filler: bytes) -> None:
    for start in (pcap(FRAMES), pcapng(FRAMES)):
        reading = read(start + filler * (2_000_000 // len(filler)), 100_000)
        assert reading.octets[:12] == FRAMES
        assert len(reading.interfaces) <= 65_536
