"""Rows of tables as plain values."""

import json
import math

from rtpaudit.report.plain import number, numbers, rows, rows_by_call
from rtpaudit.report.tables import build_tables
from tests.report import made


def test_a_row_has_every_column_and_json_can_say_it() -> None:
    tables = build_tables(made.assessment())
    (first, *_) = rows("calls", tables["calls"])
    assert first["call"] == "c01"
    assert first["started"] == made.BEGIN_NS / 1e6
    assert first["answered"] is None
    assert first["status_code"] is None
    assert first["streams"] == 2
    assert json.loads(json.dumps(rows("streams", tables["streams"]), allow_nan=False))[3]["packets_lost"] == 12


def test_rows_without_a_call_stand_under_nothing() -> None:
    findings = [made.row("findings", finding="load", call="c02"), made.row("findings", finding="capture-cut")]
    by_call = rows_by_call("findings", build_tables(made.assessment(), findings=findings)["findings"])
    assert {call: [row["finding"] for row in own] for call, own in by_call.items()} == {
        "c02": ["load"],
        "": ["capture-cut"],
    }


def test_what_is_no_number_is_none() -> None:
    assert number(math.nan) is None
    assert number(math.inf) is None
    assert number(1234567.0) == 1234570.0
    assert numbers([1.26, math.nan, -math.inf]) == [1.3, None, None]
