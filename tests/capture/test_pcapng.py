"""pcapng read as its writers mean it, and as far as it goes where it is damaged."""

import struct

import pytest

from tests.capture.reading import Frame, read
from tests.craft import (
    START_NS,
    pcapng,
    pcapng_block,
    pcapng_enhanced,
    pcapng_interface,
    pcapng_obsolete,
    pcapng_section,
    pcapng_simple,
    pcapng_statistics,
    rtp_frame,
    spaced,
)

FRAMES = [rtp_frame(number) for number in range(6)]
BLOCK = 32 + 216
ORDERS = pytest.mark.parametrize("big", [False, True])


def order(big: bool) -> str:
    return ">" if big else "<"


@ORDERS
def test_enhanced_packet_blocks_of_both_byte_orders(big: bool) -> None:
    times = [START_NS + 123_456_789 * row for row in range(6)]
    reading = read(pcapng(FRAMES, times, big_endian=big))
    assert reading.frames == [Frame(frame, 214, time, 0) for frame, time in zip(FRAMES, times, strict=True)]
    assert reading.damage == []


@pytest.mark.parametrize("size", [1, 2, 3, 5, 6, 7])
def test_the_size_of_a_batch_changes_nothing(size: int) -> None:
    assert read(pcapng(FRAMES), size).octets == FRAMES


def test_a_snap_length_keeps_the_length_on_the_wire() -> None:
    frame = read(pcapng([FRAMES[0][:61]], originals=[214])).frames[0]
    assert (frame.octets, frame.original) == (FRAMES[0][:61], 214)


@ORDERS
def test_sections_may_differ_in_byte_order_and_number_their_interfaces_anew(big: bool) -> None:
    first = pcapng_section(big) + pcapng_interface(1, options=[(2, b"eth0")], big_endian=big)
    first += pcapng_enhanced(FRAMES[0], START_NS // 1000, big_endian=big)
    second = pcapng_section(not big) + pcapng_interface(113, 96, [(2, b"any")], not big)
    second += pcapng_interface(101, options=[(9, b"\x09")], big_endian=not big)
    second += pcapng_enhanced(FRAMES[1], START_NS, 1, big_endian=not big)
    second += pcapng_enhanced(FRAMES[2], START_NS // 1000, 0, big_endian=not big)
    reading = read(first + second)
    assert [(frame.octets, frame.interface) for frame in reading.frames] == list(zip(FRAMES, [0, 2, 1], strict=False))
    assert reading.times_ns == [START_NS] * 3
    assert [(one.link_type, one.name, one.snap_length) for one in reading.interfaces] == [
        (1, "eth0", 0),
        (113, "any", 96),
        (101, "", 0),
    ]


def test_a_section_without_interfaces_may_not_use_those_of_the_one_before() -> None:
    reading = read(pcapng(FRAMES) + pcapng_section() + pcapng_enhanced(FRAMES[0], 0))
    assert reading.octets == FRAMES
    assert [row.what for row in reading.damage] == ["1 packet blocks of an interface that is not described"]


@pytest.mark.parametrize("length", [-1, 0, 24, 10_000])
def test_the_stated_length_of_a_section_does_not_matter(length: int) -> None:
    assert read(pcapng_section(length=length) + pcapng(FRAMES)[28:]).octets == FRAMES


# The time stamp's exact value in ns, worked out with whole numbers of any size.
RESOLUTIONS = {
    "seconds": (0, 1_700_000_000, 1_700_000_000 * 10**9),
    "milliseconds": (3, 1_700_000_000_123, 1_700_000_000_123 * 10**6),
    "microseconds": (6, 1_700_000_000_123_456, 1_700_000_000_123_456 * 10**3),
    "nanoseconds": (9, 1_700_000_000_123_456_789, 1_700_000_000_123_456_789),
    "picoseconds": (12, 2**64 - 1, (2**64 - 1) // 1000),
    "ten to the minus 40": (40, 2**64 - 1, 0),
    "2 to the 0": (0x80, 1_700_000_000, 1_700_000_000 * 10**9),
    "2 to the minus 10": (0x8A, 1_700_000_000 * 2**10 + 1023, 1_700_000_000 * 10**9 + 1023 * 10**9 // 2**10),
    "2 to the minus 31": (0x9F, 1_700_000_000 * 2**31 + 1, 1_700_000_000 * 10**9),
    "2 to the minus 32": (0xA0, (1_700_000_000 << 32) + 2**32 - 1, 1_700_000_000 * 10**9 + 999_999_999),
    "2 to the minus 40": (0xA8, 12_345_678 * 2**40 + 2**39 + 1, 12_345_678_500_000_000),
    "2 to the minus 63": (0xBF, 2**63 + 2**62, 1_500_000_000),
    "2 to the minus 64": (0xC0, 2**64 - 1, 999_999_999),
    "2 to the minus 100": (0xE4, 2**64 - 1, 0),
}


@pytest.mark.parametrize("name", RESOLUTIONS)
@ORDERS
def test_time_stamps_of_any_resolution_are_exact(name: str, big: bool) -> None:
    resolution, ticks, time_ns = RESOLUTIONS[name]
    interface = pcapng_interface(options=[(9, bytes([resolution]))], big_endian=big)
    capture = pcapng_section(big) + interface + pcapng_enhanced(FRAMES[0], ticks, big_endian=big)
    assert read(capture).times_ns == [time_ns]


@ORDERS
@pytest.mark.parametrize("offset_s", [1_700_000_000, -3, 0])
def test_the_time_offset_of_an_interface_is_added(big: bool, offset_s: int) -> None:
    options = [(14, struct.pack(order(big) + "q", offset_s))]
    capture = pcapng_section(big) + pcapng_interface(options=options, big_endian=big)
    capture += pcapng_enhanced(FRAMES[0], 5_000_001, big_endian=big)
    assert read(capture).times_ns == [5_000_001_000 + offset_s * 10**9]


def test_a_time_out_of_all_bounds_stays_a_time() -> None:
    options = [(14, struct.pack("<q", -(2**63)))]
    capture = pcapng_section() + pcapng_interface(options=options) + pcapng_interface()
    capture += pcapng_enhanced(FRAMES[0], 5) + pcapng_enhanced(FRAMES[0], 2**64 - 1, 1)
    # 2 ** 62 ns, rounded down to whole microseconds.
    assert read(capture).times_ns == [0, 4_611_686_018_427_387_000]


@ORDERS
def test_simple_packet_blocks_take_the_time_of_the_frame_before(big: bool) -> None:
    capture = pcapng_section(big) + pcapng_interface(options=[(9, b"\x09")], big_endian=big)
    capture += pcapng_simple(FRAMES[0], big_endian=big)
    for number in (1, 2):
        capture += pcapng_enhanced(FRAMES[number], START_NS + number, big_endian=big)
    capture += pcapng_simple(FRAMES[3], big_endian=big)
    reading = read(capture)
    assert reading.octets == FRAMES[:4]
    assert [time - START_NS for time in reading.times_ns] == [1, 1, 2, 2]
    assert [row.what for row in reading.damage] == ["2 packet blocks without a time stamp"]


def test_a_capture_of_simple_packet_blocks_alone_is_at_time_zero() -> None:
    capture = pcapng_section() + pcapng_interface() + pcapng_simple(FRAMES[0]) + pcapng_simple(FRAMES[1])
    reading = read(capture, 1)
    assert reading.octets == FRAMES[:2]
    assert reading.times_ns == [0, 0]


def test_a_simple_packet_block_is_cut_at_the_snap_length_of_interface_0() -> None:
    capture = pcapng_section() + pcapng_interface(snap_length=61) + pcapng_simple(FRAMES[0][:61], original=214)
    frame = read(capture).frames[0]
    assert (frame.octets, frame.original) == (FRAMES[0][:61], 214)


@ORDERS
def test_obsolete_packet_blocks_are_read_and_their_drops_counted(big: bool) -> None:
    capture = pcapng_section(big) + pcapng_interface(big_endian=big) + pcapng_interface(big_endian=big)
    for number, drops in ((0, 2), (1, 0xFFFF), (2, 5)):
        capture += pcapng_obsolete(FRAMES[number], 7, 1, drops, big)
    reading = read(capture)
    assert reading.frames == [Frame(frame, 214, 7000, 1) for frame in FRAMES[:3]]
    # 0xffff means that the count is not known.
    assert [one.dropped for one in reading.interfaces] == [None, 7]


@ORDERS
def test_drops_noted_in_enhanced_packet_blocks_add_up(big: bool) -> None:
    capture = pcapng_section(big) + pcapng_interface(big_endian=big)
    for drops in (3, 0, 4):
        options = [(1, b"a comment"), (2, bytes(4)), (4, struct.pack(order(big) + "Q", drops)), (5, bytes(8))]
        capture += pcapng_enhanced(FRAMES[0], 0, options=options, big_endian=big)
    assert [one.dropped for one in read(capture, 1).interfaces] == [7]


@ORDERS
def test_the_last_interface_statistics_hold(big: bool) -> None:
    capture = pcapng_section(big) + pcapng_interface(big_endian=big) + pcapng_interface(big_endian=big)
    capture += pcapng_enhanced(FRAMES[0], 0, options=[(4, struct.pack(order(big) + "Q", 99))], big_endian=big)
    for received, dropped in ((10, 1), (20, 2)):
        capture += pcapng_statistics(0, received, dropped, big)
    capture += pcapng_statistics(1, 5, None, big) + pcapng_statistics(2, 7, 7, big)
    assert [(one.received, one.dropped) for one in read(capture).interfaces] == [(20, 2), (5, None)]


def test_a_count_of_all_ones_is_no_count() -> None:
    capture = pcapng_section() + pcapng_interface() + pcapng_statistics(0, 2**64 - 1, 2**64 - 1)
    assert [(one.received, one.dropped) for one in read(capture).interfaces] == [(None, None)]


@ORDERS
@pytest.mark.parametrize("kind", [4, 9, 10, 0x0BAD, 0x40000BAD, 0x80000001])
def test_other_blocks_are_passed_over(big: bool, kind: int) -> None:
    head = pcapng_section(big) + pcapng_interface(options=[(9, b"\x09")], big_endian=big)
    other = pcapng_block(kind, b"anything", big)
    capture = head + other
    for frame, time_ns in zip(FRAMES, spaced(6), strict=True):
        capture += pcapng_enhanced(frame, time_ns, big_endian=big) + other
    reading = read(capture)
    assert reading.octets == FRAMES
    assert reading.damage == []


def test_a_section_header_alone_is_a_capture_without_frames() -> None:
    assert read(pcapng_section()) == ([], [], [])


@ORDERS
@pytest.mark.parametrize("size", [1, 2, 1000])
def test_every_cut_keeps_the_whole_blocks_and_what_is_there_of_the_last(big: bool, size: int) -> None:
    capture = pcapng(FRAMES[:3], big_endian=big)
    head = len(pcapng([]))
    for cut in range(28, len(capture)):
        whole, rest = divmod(max(cut - head, 0), BLOCK)
        reading = read(capture[:cut], size)
        begun = [FRAMES[whole][: rest - 28]] if rest > 27 else []
        assert [octets for octets in reading.octets if octets] == FRAMES[:whole] + [
            octets for octets in begun if octets
        ]
        assert len(reading.damage) == (1 if rest or 28 < cut < head else 0)


@ORDERS
@pytest.mark.parametrize("place", ["first length", "last length"])
@pytest.mark.parametrize("length", [0, 11, 12, 244, 252, 1000, 1 << 20, 0xFFFFFFFF])
def test_a_wrong_length_loses_no_frame(big: bool, place: str, length: int) -> None:
    capture = bytearray(pcapng(FRAMES, big_endian=big))
    block = len(pcapng([])) + 2 * BLOCK
    at = block + 4 if place == "first length" else block + BLOCK - 4
    capture[at : at + 4] = length.to_bytes(4, "big" if big else "little")
    reading = read(bytes(capture))
    assert reading.octets == FRAMES
    assert [(row.offset, row.lost) for row in reading.damage] == [(block, "nothing")]


def test_a_destroyed_block_header_loses_its_frame_alone() -> None:
    block = len(pcapng([])) + 2 * BLOCK
    capture = pcapng(FRAMES)
    reading = read(capture[:block] + b"\xff" * 28 + capture[block + 28 :])
    assert reading.octets == FRAMES[:2] + FRAMES[3:]
    assert [(row.offset, row.lost) for row in reading.damage] == [(block, "248 octets")]


@ORDERS
@pytest.mark.parametrize("at", [4, 24])
def test_a_section_header_with_a_wrong_length_still_opens_its_section(big: bool, at: int) -> None:
    capture = bytearray(pcapng(FRAMES, big_endian=big))
    capture[at : at + 4] = b"\xff\xff\xff\xff"
    reading = read(bytes(capture))
    assert reading.octets == FRAMES
    assert len(reading.damage) == 1


def test_octets_put_in_between_are_passed_over() -> None:
    capture = pcapng(FRAMES)
    cut = len(pcapng([])) + 3 * BLOCK
    reading = read(capture[:cut] + b"\x55" * 5001 + capture[cut:])
    assert reading.octets == FRAMES
    assert [(row.offset, row.lost) for row in reading.damage] == [(cut, "5,001 octets")]


def test_a_frame_said_to_be_longer_than_its_block_ends_with_it() -> None:
    capture = bytearray(pcapng(FRAMES))
    at = len(pcapng([])) + BLOCK + 20
    capture[at : at + 4] = b"\xff\xff\xff\xff"
    reading = read(bytes(capture))
    assert reading.octets == [FRAMES[0], FRAMES[1] + bytes(2), *FRAMES[2:]]
    assert [row.offset for row in reading.damage] == [at - 20]


def test_a_packet_block_too_small_for_its_own_header_is_left_out() -> None:
    capture = pcapng(FRAMES[:1]) + pcapng_block(6, bytes(8)) + pcapng_block(3, b"") + pcapng(FRAMES[1:2])
    reading = read(capture)
    assert reading.octets == FRAMES[:2]
    assert reading.damage[0].what == "2 packet blocks too small for the frame that they announce"


def test_an_interface_described_too_shortly_keeps_its_number() -> None:
    capture = pcapng_section() + pcapng_block(1, b"\x01\x00") + pcapng_interface(113)
    reading = read(capture + pcapng_enhanced(FRAMES[0], 0, 1))
    assert [one.link_type for one in reading.interfaces] == [0xFFFF, 113]
    assert [frame.interface for frame in reading.frames] == [1]


def test_options_without_end_do_not_hold_the_reader_up() -> None:
    capture = pcapng_section() + pcapng_interface(options=[(2, b"eth0")] + [(1, b"")] * 100_000 + [(9, b"\x09")])
    reading = read(capture + pcapng_enhanced(FRAMES[0], 1))
    assert reading.interfaces[0].name == "eth0"
    assert reading.times_ns == [1000]


def test_a_name_that_would_steer_a_terminal_is_made_harmless() -> None:
    capture = pcapng_section() + pcapng_interface(options=[(2, b"\x1b[2Jeth0\xff\x00")])
    assert read(capture).interfaces[0].name == "\\x1b[2Jeth0�"


def test_a_section_of_another_version_is_read_with_a_note() -> None:
    capture = bytearray(pcapng(FRAMES))
    capture[12] = 9
    reading = read(bytes(capture))
    assert reading.octets == FRAMES
    assert [row.what for row in reading.damage] == ["a section of the unknown version 9.0"]
