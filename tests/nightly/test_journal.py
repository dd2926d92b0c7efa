"""The journal: whole lines only, each capture and profile once."""

from pathlib import Path

import pytest

from rtpaudit.errors import UnusableHistory
from rtpaudit.nightly.journal import DONE, FAILED, Batch, Entry, Journal, Known


def entry(capture: str, **more: object) -> Entry:
    given = {
        "profile": "p",
        "status": DONE,
        "size": 10,
        "place": f"at {capture}",
        "look": "10 1",
        "version": "1",
    } | more
    return Entry(capture, **given)  # type: ignore[arg-type]


def written(path: Path, count: int) -> list[Batch]:
    batches = [Batch(f"b{k}", "2026-03-01T00:00:00", (f"night=2026-03-01/calls-b{k}.parquet",), (entry(f"c{k}"),))
               for k in range(count)]  # fmt: skip
    journal = Journal(path)
    for batch in batches:
        journal.append(batch)
    return batches


def test_what_is_written_is_read(tmp_path: Path) -> None:
    batches = written(tmp_path / "journal", 3)
    assert Journal(tmp_path / "journal").read() == batches


def test_a_second_reading_brings_only_what_came_since(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "journal")
    written(tmp_path / "journal", 1)
    assert len(journal.read()) == 1
    assert journal.read() == []


def test_a_line_cut_anywhere_counts_for_nothing_and_is_written_over(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    batches = written(path, 2)
    octets = path.read_bytes()
    first = octets.index(b"\n") + 1
    for length in range(first, len(octets)):
        path.write_bytes(octets[:length])
        journal = Journal(path)
        assert journal.read() == batches[:1]
        journal.append(batches[1])
        assert path.read_bytes() == octets


def test_a_last_line_of_zeros_counts_for_nothing(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    batches = written(path, 1)
    path.write_bytes(path.read_bytes() + bytes(100))
    assert Journal(path).read() == batches


def test_a_damaged_line_before_the_last_is_told(tmp_path: Path) -> None:
    path = tmp_path / "journal"
    written(path, 3)
    octets = bytearray(path.read_bytes())
    octets[len(octets) // 2] ^= 1
    path.write_bytes(octets)
    with pytest.raises(UnusableHistory, match="line 2 is damaged"):
        Journal(path).read()


def test_a_known_capture_is_known_by_its_content_and_by_its_look() -> None:
    known = Known("1")
    known.add(Batch("b", "", entries=(entry("c"),)))
    assert known.has("c", "p")
    assert not known.has("c", "another profile")
    assert known.has_seen("at c", "10 1", "p")
    assert not known.has_seen("at c", "11 1", "p")
    assert known.of_size(10, "p") == ("c",)
    assert known.of_size(11, "p") == ()


def test_what_failed_is_tried_again_by_another_version_only() -> None:
    failed = Batch("b", "", entries=(entry("c", status=FAILED),))
    for version, there in (("1", True), ("2", False)):
        known = Known(version)
        known.add(failed)
        assert known.has("c", "p") is there
        assert known.has_seen("at c", "10 1", "p") is there
