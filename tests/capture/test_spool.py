"""The temporary file takes what it is given, and leaves room on the disk."""

from collections.abc import Iterator
from typing import NamedTuple

import pytest

from rtpaudit.capture import spool as room


class Usage(NamedTuple):
    free: int


def test_pieces_are_laid_down_in_order() -> None:
    file, length, stopped = room.spool(iter([b"ab", b"", b"cde"]))
    with file:
        file.seek(0)
        assert file.read() == b"abcde"
    assert (length, stopped) == (5, "")


def test_it_stops_before_the_disk_is_full(monkeypatch: pytest.MonkeyPatch) -> None:
    free = iter([1 << 30, 1 << 30, room.FREE_OCTETS])
    monkeypatch.setattr(room, "disk_usage", lambda _: Usage(next(free)))
    piece = bytes(1 << 20)
    file, length, stopped = room.spool(piece for _ in range(1000))
    file.close()
    assert length == 2 * room.CHECK_EVERY
    assert stopped == "the disk of temporary files is nearly full"


def test_a_file_made_to_fill_a_disk_is_stopped(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(room, "FREE_TIMES_FROM", 1 << 20)
    piece = bytes(1 << 16)
    file, length, stopped = room.spool((piece for _ in range(1000)), lambda: 4000)
    file.close()
    assert length == 2_031_616
    assert stopped == "the file grows to more than 500 times its size"


def test_what_fails_to_read_ends_the_copy_with_a_note() -> None:
    def pieces() -> Iterator[bytes]:
        yield b"abc"
        raise OSError(5, "Input/output error")

    file, length, stopped = room.spool(pieces())
    file.close()
    assert (length, stopped) == (3, "copying to a temporary file stopped (Input/output error)")


def test_no_folder_for_temporary_files_is_said_so(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(**_: object) -> None:
        raise FileNotFoundError(2, "No usable temporary directory found")

    monkeypatch.setattr(room.tempfile, "TemporaryFile", refuse)
    with pytest.raises(OSError, match="TMPDIR names another"):
        room.spool([b"abc"])
