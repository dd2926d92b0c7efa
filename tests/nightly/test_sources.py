"""Sources: folders, patterns and addresses; what still grows is left alone."""

import os
import time
from pathlib import Path

import pytest

from rtpaudit.errors import UnusableArguments
from rtpaudit.nightly.sources import list_sources
from tests.craft import pcap, pcapng


def put(path: Path, octets: bytes = pcap([]), age_s: float = 3600.0) -> Path:
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(octets)
    os.utime(path, (time.time() - age_s,) * 2)
    return path


def names(*sources: object) -> list[str]:
    return [one.name for one in list_sources([str(one) for one in sources]).captures]


def test_a_folder_gives_what_begins_like_a_capture_at_any_depth(tmp_path: Path) -> None:
    put(tmp_path / "b.pcap")
    put(tmp_path / "deep" / "er" / "a.without-a-telling-name", pcapng([]))
    put(tmp_path / "c.pcap.gz", b"\x1f\x8b rest")
    put(tmp_path / "notes.txt", b"no capture")
    put(tmp_path / ".hidden" / "d.pcap")
    put(tmp_path / "empty.pcap", b"")
    assert names(tmp_path) == ["b.pcap", "c.pcap.gz", "a.without-a-telling-name"]


def test_a_pattern_gives_what_matches_whatever_it_holds(tmp_path: Path) -> None:
    put(tmp_path / "monday" / "a.pcap")
    put(tmp_path / "tuesday" / "b.pcap", b"no capture")
    put(tmp_path / "tuesday" / "c.cap")
    assert names(tmp_path / "*" / "*.pcap") == ["a.pcap", "b.pcap"]
    assert names(tmp_path / "**" / "*.cap") == ["c.cap"]


def test_a_file_found_twice_is_one(tmp_path: Path) -> None:
    path = put(tmp_path / "a.pcap")
    (tmp_path / "link.pcap").symlink_to(path)
    os.link(path, tmp_path / "other-name.pcap")
    assert len(names(tmp_path, path, tmp_path / "*.pcap")) == 2
    assert len(names(tmp_path)) == 1


def test_folders_that_lead_in_a_circle_end(tmp_path: Path) -> None:
    put(tmp_path / "in" / "a.pcap")
    (tmp_path / "in" / "again").symlink_to(tmp_path, target_is_directory=True)
    assert names(tmp_path) == ["a.pcap"]


def test_a_file_that_still_changes_is_left_for_later(tmp_path: Path) -> None:
    put(tmp_path / "old.pcap")
    put(tmp_path / "growing.pcap", age_s=1.0)
    listing = list_sources([str(tmp_path)])
    assert [one.name for one in listing.captures] == ["old.pcap"]
    assert [one.name for one in listing.unsettled] == ["growing.pcap"]
    assert len(list_sources([str(tmp_path)], settle_s=0.0).captures) == 2


@pytest.mark.parametrize("source", ["missing", "none-*.pcap", "nowhere://place/x"])
def test_a_source_that_names_nothing_is_refused(tmp_path: Path, source: str) -> None:
    with pytest.raises(UnusableArguments, match=r"missing|none|nowhere"):
        list_sources([source if ":" in source else str(tmp_path / source)])


def test_an_address_is_listed_like_a_folder(tmp_path: Path) -> None:
    pytest.importorskip("fsspec")
    put(tmp_path / "deep" / "a.pcap")
    put(tmp_path / "b.pcap")
    (first, second) = list_sources([f"file://{tmp_path}"]).captures
    assert [first.name, second.name] == ["b.pcap", "a.pcap"]
    assert first.remote
    assert first.size == 24
    assert [one.name for one in list_sources([f"file://{tmp_path}/*.pcap"]).captures] == ["b.pcap"]


def test_what_logs_in_is_no_part_of_what_a_file_is_known_by(tmp_path: Path) -> None:
    pytest.importorskip("fsspec")
    from fsspec.implementations.memory import MemoryFileSystem

    MemoryFileSystem().pipe("/captures/a.pcap", pcap([]))
    (found,) = list_sources(["memory://captures"], settle_s=0.0).captures
    assert (found.address, found.path, found.source) == (
        "memory:///captures/a.pcap",
        "/captures/a.pcap",
        "memory://captures",
    )
