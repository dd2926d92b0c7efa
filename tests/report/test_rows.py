"""Tables as text: what is read back is what stood in the table."""

import csv
import io
import json

import numpy as np
import pandas as pd
import pytest

from rtpaudit.assess.results import Assessment
from rtpaudit.columns import TABLES
from rtpaudit.report import rows
from rtpaudit.report.rows import csv_cell, csv_lines, json_lines
from rtpaudit.report.tables import build_tables
from tests.report import made


def as_csv(table: str, frame: pd.DataFrame) -> list[dict[str, str]]:
    text = b"".join(csv_lines(table, frame)).decode()
    return list(csv.DictReader(io.StringIO(text, newline=""), strict=True))


def as_json(table: str, frame: pd.DataFrame) -> list[dict[str, object]]:
    return json.loads(b"[" + b"".join(json_lines(table, frame)) + b"]")


def with_damage(*whats: str) -> pd.DataFrame:
    damage = [made.Damage("a.pcap", number, what, "1 frame") for number, what in enumerate(whats)]
    return build_tables(Assessment(captures=[], damage=damage))["damage"]


@pytest.mark.parametrize("table", TABLES)
def test_headings_are_the_columns_even_without_rows(table: str) -> None:
    empty = build_tables(Assessment(captures=[]))[table]
    assert b"".join(csv_lines(table, empty)).decode() == ",".join(one.name for one in TABLES[table]) + "\n"
    assert as_json(table, empty) == []


def test_missing_cells_are_empty_and_null() -> None:
    tables = build_tables(made.assessment())
    assert as_csv("calls", tables["calls"])[0]["answered"] == ""
    assert as_csv("streams", tables["streams"])[4]["call"] == ""
    assert as_csv("streams", tables["streams"])[0]["packets_discarded"] == ""
    assert as_json("calls", tables["calls"])[0]["mos_cqe"] is None
    assert as_json("streams", tables["streams"])[4]["call"] is None


def test_times_are_iso_8601_in_utc_with_every_nanosecond() -> None:
    one = made.stream("s01")
    one.started_ns = 1_700_000_000_123_456_789
    frame = build_tables(Assessment(captures=[], streams=[one]))["streams"]
    assert as_csv("streams", frame)[0]["started"] == "2023-11-14T22:13:20.123456789Z"
    assert as_json("streams", frame)[0]["started"] == "2023-11-14T22:13:20.123456789Z"


@pytest.mark.parametrize("number", [0.1, 2 / 3, -0.0, 1e-9, 1e300, 123456789.123456789, 5.0, np.pi])
def test_no_digit_of_a_number_is_lost(number: float) -> None:
    frame = build_tables(Assessment(captures=[], streams=[made.stream("s01", jitter_ms=number)]))["streams"]
    assert float(as_csv("streams", frame)[0]["jitter_ms"]) == number
    assert as_json("streams", frame)[0]["jitter_ms"] == number


@pytest.mark.parametrize("number", [np.nan, np.inf, -np.inf])
def test_what_is_no_number_is_missing(number: float) -> None:
    frame = build_tables(Assessment(captures=[], streams=[made.stream("s01", jitter_ms=number)]))["streams"]
    assert as_csv("streams", frame)[0]["jitter_ms"] == ""
    assert as_json("streams", frame)[0]["jitter_ms"] is None


def test_yes_and_no_are_words() -> None:
    streams = [made.stream("s01", encrypted=True), made.stream("s02")]
    frame = build_tables(Assessment(captures=[], streams=streams))["streams"]
    assert [row["encrypted"] for row in as_csv("streams", frame)] == ["true", "false"]
    assert [row["encrypted"] for row in as_json("streams", frame)] == [True, False]


@pytest.mark.parametrize(
    "text",
    ['a "quoted" word', "a,b", "two\nlines", "two\r\nlines", " edge ", "</script>", "ünïcode ☎", "\\", "\x1b[31m"],
)
def test_any_text_comes_back(text: str) -> None:
    frame = with_damage("before", text, "after")
    assert [row["what"] for row in as_csv("damage", frame)] == ["before", text, "after"]
    assert [row["what"] for row in as_json("damage", frame)] == ["before", text, "after"]


@pytest.mark.parametrize(
    "text", ["=1+1", "+1+1", "-2+3", "@SUM(A1)", "\t=1", "\r=1", " =1", "＝1+1", "+44 1632", '=HYPERLINK("x")', "-"]
)
def test_a_cell_that_begins_like_a_formula_is_made_text(text: str) -> None:
    assert as_csv("damage", with_damage(text))[0]["what"] == "'" + text


@pytest.mark.parametrize("text", ["+441632960142", "192.0.2.10", "a=b", "sip:alice@example.com", "'quoted'"])
def test_other_cells_stay_as_they_are(text: str) -> None:
    assert csv_cell(text) == text


def test_a_null_octet_does_not_end_a_cell() -> None:
    assert csv_cell("a\0b") == "a\ufffdb"


@pytest.mark.parametrize("at_once", [1, 2, 3, 5, 100])
def test_long_tables_are_written_in_parts(at_once: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(rows, "ROWS_AT_ONCE", at_once)
    frame = build_tables(Assessment(captures=[], streams=[made.stream("s01", windows=made.windows(5))]))["windows"]
    assert [float(row["from_s"]) for row in as_csv("windows", frame)] == [0, 2, 4, 6, 8]
    assert [row["from_s"] for row in as_json("windows", frame)] == [0, 2, 4, 6, 8]


def test_pandas_reads_the_same_table_back() -> None:
    frame = build_tables(made.assessment())["windows"]
    back = pd.read_csv(io.BytesIO(b"".join(csv_lines("windows", frame))), dtype=frame.dtypes.to_dict())
    pd.testing.assert_frame_equal(back, frame)
