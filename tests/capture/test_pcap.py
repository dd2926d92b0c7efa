"""pcap read as its writers mean it, and as far as it goes where it is damaged."""

import struct

import pytest

from tests.capture.reading import read
from tests.craft import START_NS, pcap, rtp_frame, spaced

FRAMES = [rtp_frame(number) for number in range(6)]
RECORD = 16 + len(FRAMES[0])
HEADER = 24


def overwritten(capture: bytes, at: int, octets: bytes) -> bytes:
    return capture[:at] + octets + capture[at + len(octets) :]


@pytest.mark.parametrize("big_endian", [False, True])
@pytest.mark.parametrize(("nanoseconds", "tick_ns"), [(False, 1000), (True, 1)])
def test_both_byte_orders_and_both_resolutions_read_alike(big_endian: bool, nanoseconds: bool, tick_ns: int) -> None:
    times = [START_NS + 123_456_789 * row for row in range(6)]
    reading = read(pcap(FRAMES, times, nanoseconds=nanoseconds, big_endian=big_endian))
    assert reading.octets == FRAMES
    assert reading.times_ns == [time // tick_ns * tick_ns for time in times]
    assert reading.damage == []


def test_a_time_after_2038_is_unsigned() -> None:
    late = 4_102_444_800_000_000_000
    assert read(pcap(FRAMES[:1], [late])).times_ns == [late]


def test_a_snap_length_keeps_the_length_on_the_wire() -> None:
    frame = read(pcap([FRAMES[0][:60]], originals=[214], snap_length=60)).frames[0]
    assert (len(frame.octets), frame.original) == (60, 214)


def test_a_frame_longer_than_the_snap_length_is_kept() -> None:
    assert read(pcap(FRAMES, snap_length=60)).octets == FRAMES


def test_a_length_on_the_wire_below_the_captured_one_counts_as_that() -> None:
    assert [frame.original for frame in read(pcap(FRAMES, originals=[0] * 6)).frames] == [214] * 6


def test_the_length_of_the_frame_check_sequence_is_no_part_of_the_link_type() -> None:
    capture = pcap(FRAMES, link_type=0x24000000 | 113)
    assert [interface.link_type for interface in read(capture).interfaces] == [113]


def test_a_header_alone_is_a_capture_without_frames() -> None:
    reading = read(pcap([]))
    assert reading.frames == []
    assert reading.damage == []


@pytest.mark.parametrize("size", [1, 2, 3, 5, 6, 7])
def test_the_size_of_a_batch_changes_nothing(size: int) -> None:
    assert read(pcap(FRAMES), size).octets == FRAMES


@pytest.mark.parametrize("size", [1, 2, 1000])
def test_every_cut_keeps_the_whole_records_and_what_is_there_of_the_last(size: int) -> None:
    capture = pcap(FRAMES[:3])
    for cut in range(HEADER, len(capture)):
        whole, rest = divmod(cut - HEADER, RECORD)
        reading = read(capture[:cut], size)
        begun = [FRAMES[whole][: rest - 16]] if rest > 16 else []
        assert reading.octets == FRAMES[:whole] + begun
        assert all(frame.original == 214 for frame in reading.frames)
        assert [row.offset for row in reading.damage] == ([HEADER + whole * RECORD] if rest else [])


@pytest.mark.parametrize("size", [1, 2, 3, 1000])
@pytest.mark.parametrize("big_endian", [False, True])
@pytest.mark.parametrize("length", [0, 5, 100, 213, 215, 300, 1000, 70_000, 1 << 21, 0xFFFFFFFF])
def test_a_wrong_length_in_the_middle_loses_no_frame(size: int, big_endian: bool, length: int) -> None:
    at = HEADER + 2 * RECORD + 8
    capture = overwritten(
        pcap(FRAMES, big_endian=big_endian), at, length.to_bytes(4, "big" if big_endian else "little")
    )
    reading = read(capture, size)
    assert reading.octets == FRAMES
    assert len(reading.damage) == 1
    assert reading.damage[0].lost == "nothing"


def test_a_destroyed_record_header_loses_its_frame_alone() -> None:
    capture = overwritten(pcap(FRAMES), HEADER + 2 * RECORD, b"\xff" * 16)
    reading = read(capture)
    assert reading.octets == FRAMES[:2] + FRAMES[3:]
    assert [(row.offset, row.lost) for row in reading.damage] == [(HEADER + 2 * RECORD, "230 octets")]


def test_octets_that_were_put_in_between_are_passed_over() -> None:
    capture = pcap(FRAMES)
    cut = HEADER + 3 * RECORD
    reading = read(capture[:cut] + b"\x55" * 5000 + capture[cut:])
    assert reading.octets == FRAMES
    assert [(row.offset, row.lost) for row in reading.damage] == [(cut, "5,000 octets")]


def test_captures_put_one_behind_the_other_read_through() -> None:
    later = pcap(FRAMES, spaced(6, START_NS + 3_600_000_000_000))
    reading = read(pcap(FRAMES) + later)
    assert reading.octets == FRAMES + FRAMES
    assert [row.offset for row in reading.damage] == [len(pcap(FRAMES))]


def test_the_zeros_of_a_file_that_was_laid_out_and_not_written_are_no_frames() -> None:
    reading = read(pcap(FRAMES) + bytes(100_000))
    assert reading.octets == FRAMES
    assert [(row.offset, row.lost) for row in reading.damage] == [(len(pcap(FRAMES)), "100,000 octets")]


def test_a_capture_inside_a_payload_is_no_part_of_this_one() -> None:
    carrier = FRAMES[0] + pcap(FRAMES)
    reading = read(pcap([carrier, *FRAMES]))
    assert reading.octets == [carrier, *FRAMES]
    assert reading.damage == []


def test_frames_of_another_year_do_not_follow_a_damaged_record() -> None:
    capture = overwritten(pcap(FRAMES), HEADER + RECORD, b"\xff" * 16)
    strange = struct.pack("<IIII", START_NS // 10**9 - 40_000_000, 0, 4, 4) + b"abcd"
    cut = HEADER + 2 * RECORD
    reading = read(capture[:cut] + strange * 5 + capture[cut:])
    assert reading.octets == FRAMES[:1] + FRAMES[2:]


def test_damage_everywhere_is_summed_up() -> None:
    capture = pcap(FRAMES) + b"".join(b"\xff" * 30 + pcap(FRAMES[:3])[HEADER:] for _ in range(300))
    reading = read(capture)
    assert reading.octets == FRAMES + FRAMES[:3] * 300
    assert len(reading.damage) == 101
    assert reading.damage[-1].what == "200 more damaged places from here on"
