"""Which files are one recording."""

from pathlib import Path

import pytest

from rtpaudit.capture import Recording, open_recordings
from rtpaudit.errors import UnreadableCapture, UnusableArguments
from tests.craft import START_NS, pcap, pcapng, rtp_frame, spaced

SECOND = 1_000_000_000


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return tmp_path


def capture(path: Path, from_s: float, to_s: float, link_type: int = 1) -> Path:
    """Frames every 100 ms from one time to the other, both included."""
    times = spaced(round((to_s - from_s) * 10) + 1, START_NS + round(from_s * SECOND), SECOND // 10)
    path.write_bytes(pcap([rtp_frame(0)] * len(times), times, link_type=link_type))
    return path


def names(recordings: list[Recording]) -> list[list[str]]:
    return [[file.name for file in recording.files] for recording in recordings]


def test_a_ring_of_files_is_one_recording_in_order_of_time(folder: Path) -> None:
    third = capture(folder / "ring.3", 20, 30)
    first = capture(folder / "ring.1", 0, 10)
    second = capture(folder / "ring.2", 10.1, 19.9)
    recordings = open_recordings([third, first, second])
    assert names(recordings) == [["ring.1", "ring.2", "ring.3"]]
    assert recordings[0].name == "ring.1"


@pytest.mark.parametrize(("overlap_s", "together"), [(0.0, True), (1.0, True), (1.1, False), (10.0, False)])
def test_a_second_of_overlap_is_still_a_ring_and_more_is_a_second_capture_point(
    folder: Path, overlap_s: float, together: bool
) -> None:
    paths = [capture(folder / "a", 0, 10), capture(folder / "b", 10 - overlap_s, 20)]
    assert names(open_recordings(paths)) == ([["a", "b"]] if together else [["a"], ["b"]])


def test_other_link_types_are_other_recordings(folder: Path) -> None:
    paths = [capture(folder / "a", 0, 10), capture(folder / "b", 11, 20, link_type=113), capture(folder / "c", 11, 20)]
    assert names(open_recordings(paths)) == [["a", "c"], ["b"]]


def test_a_capture_given_twice_is_two_recordings(folder: Path) -> None:
    path = capture(folder / "a", 0, 10)
    assert names(open_recordings([path, path])) == [["a"], ["a"]]


def test_two_capture_points_that_rotate_at_one_time_stay_apart(folder: Path) -> None:
    paths = [
        capture(folder / f"{point}-{turn:03}", 60 * turn + shift, 60 * turn + 60 + shift)
        for turn in range(4)
        for point, shift in (("core", 0.0), ("edge", 0.2))
    ]
    assert names(open_recordings(paths)) == [[f"{point}-{turn:03}" for turn in range(4)] for point in ("core", "edge")]


def test_a_long_file_keeps_the_short_ones_within_it_out(folder: Path) -> None:
    paths = [capture(folder / "long", 0, 100), capture(folder / "short", 10, 20), capture(folder / "later", 50, 60)]
    assert names(open_recordings(paths)) == [["long"], ["short", "later"]]


def test_plain_and_pcapng_files_of_a_ring_go_together(folder: Path) -> None:
    first = capture(folder / "a", 0, 10)
    second = folder / "b"
    second.write_bytes(pcapng([rtp_frame(0)], [START_NS + 11 * SECOND]))
    assert names(open_recordings([first, second])) == [["a", "b"]]


def test_a_file_without_frames_stands_alone(folder: Path) -> None:
    header = folder / "header"
    header.write_bytes(pcap([]))
    assert names(open_recordings([header, capture(folder / "a", 0, 10)])) == [["a"], ["header"]]
    assert names(open_recordings([header])) == [["header"]]


def test_an_unreadable_file_among_others_is_damage(folder: Path) -> None:
    path = capture(folder / "a", 0, 10)
    recordings = open_recordings([folder / "missing", path])
    assert names(recordings) == [["a"], ["missing"]]
    assert recordings[0].damage == []
    row = recordings[1].damage[0]
    assert (row.capture, row.offset, row.lost) == ("missing", 0, "the whole file")
    assert row.what == "there is no such file: check the spelling and the folder"
    assert list(recordings[1].files[0].batches()) == []


def test_nothing_readable_at_all_is_refused_by_the_first_name(folder: Path) -> None:
    with pytest.raises(
        UnreadableCapture, match=r"one: there is no such file.* nothing of the other files given, 2 in all"
    ):
        open_recordings([folder / "one", folder / "two"])
    with pytest.raises(UnreadableCapture, match=r"one: there is no such file: [^()]*$"):
        open_recordings([folder / "one"])


def test_no_path_at_all_is_refused() -> None:
    with pytest.raises(UnusableArguments):
        open_recordings([])


def test_damage_of_a_recording_is_that_of_its_files(folder: Path) -> None:
    first, second = capture(folder / "a", 0, 10), capture(folder / "b", 11, 20)
    for path in (first, second):
        path.write_bytes(path.read_bytes()[:-5])
    recordings = open_recordings([first, second])
    assert [row.capture for row in recordings[0].damage] == ["a", "b"]
