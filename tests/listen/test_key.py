import math
from contextlib import suppress
from dataclasses import fields
from pathlib import Path

import pytest

from rtpaudit.errors import RtpAuditError, UnusableArguments
from rtpaudit.listen.key import COLUMNS, KeyRow, clip_names, key_lines, read_key
from tests.listen.ratings import row, write_key


def written(place: Path, *rows: KeyRow) -> Path:
    return write_key(place / "key.csv", *rows)


def test_a_key_reads_back_as_it_was_written(tmp_path: Path) -> None:
    rows = [row(), row("clip-02", capture='odd, "name".pcap', reason="clipping and noise")]
    assert list(read_key(written(tmp_path, *rows)).values()) == rows


def test_what_is_not_known_stays_unknown(tmp_path: Path) -> None:
    (found,) = read_key(written(tmp_path, row(predicted_mos=float("nan"), burst_ratio=float("nan")))).values()
    assert math.isnan(found.predicted_mos)
    assert math.isnan(found.burst_ratio)


def test_a_name_that_a_spreadsheet_would_run_is_made_harmless(tmp_path: Path) -> None:
    assert ",'=cmd|calc," in written(tmp_path, row(capture="=cmd|calc")).read_text("utf-8")


def test_columns_are_the_fields() -> None:
    assert tuple(one.name for one in fields(KeyRow)) == COLUMNS
    assert key_lines([]) == [",".join(COLUMNS)]


def test_names_of_clips_tell_nothing_but_their_place() -> None:
    assert clip_names(3) == ["clip-01", "clip-02", "clip-03"]


def test_every_prefix_of_a_key_is_read_or_refused_as_ours(tmp_path: Path) -> None:
    text = written(tmp_path, row(), row("clip-02")).read_text("utf-8")
    for length in range(len(text)):
        (tmp_path / "cut.csv").write_text(text[:length], "utf-8")
        with suppress(RtpAuditError):
            read_key(tmp_path / "cut.csv")


@pytest.mark.parametrize("octets", [b"", b"\xff\xfe\xfd", bytes(3000), b"check,clip\nc,c\n"])
def test_what_is_no_key_is_refused(tmp_path: Path, octets: bytes) -> None:
    (tmp_path / "other.csv").write_bytes(octets)
    with pytest.raises(UnusableArguments, match=r"other\.csv: is no key"):
        read_key(tmp_path / "other.csv")


def test_rows_of_two_checks_are_no_key(tmp_path: Path) -> None:
    with pytest.raises(UnusableArguments, match="do not belong to one"):
        read_key(written(tmp_path, row(), row("clip-02", check="decaf")))
    with pytest.raises(UnusableArguments, match="do not belong to one"):
        read_key(written(tmp_path, row(), row()))


def test_noise_within_a_key_is_refused_with_its_line(tmp_path: Path) -> None:
    path = written(tmp_path, row(), row("clip-02"))
    for noise in (b"\0", b'"' + b"x" * 200_000, b"c0ffee,clip-03\n"):
        (tmp_path / "noisy.csv").write_bytes(path.read_bytes() + noise)
        with pytest.raises(UnusableArguments, match=r"noisy\.csv: line \d"):
            read_key(tmp_path / "noisy.csv")
