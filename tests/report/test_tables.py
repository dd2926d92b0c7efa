"""Tables: every promised column, of the promised kind, in the promised order."""

import numpy as np
import pandas as pd
import pytest

from rtpaudit.assess.results import Assessment
from rtpaudit.columns import TABLES
from rtpaudit.report.tables import build_frame, build_tables, table_columns
from tests.report import made

DTYPES = {"text": "string", "count": "Int64", "number": "float64", "time": "datetime64[ns, UTC]", "yes_no": "boolean"}


@pytest.fixture
def tables() -> dict[str, pd.DataFrame]:
    return build_tables(made.assessment())


@pytest.mark.parametrize("assessment", [made.assessment(), Assessment(captures=[])], ids=["two calls", "nothing"])
@pytest.mark.parametrize("table", TABLES)
def test_columns_stand_in_order_and_have_their_kind(table: str, assessment: Assessment) -> None:
    frame = build_tables(assessment)[table]
    assert list(frame.columns) == [column.name for column in TABLES[table]]
    assert {name: str(dtype) for name, dtype in frame.dtypes.items()} == {
        column.name: DTYPES[column.kind] for column in TABLES[table]
    }
    assert isinstance(frame.index, pd.RangeIndex)


def test_tables_come_in_one_order(tables: dict[str, pd.DataFrame]) -> None:
    assert list(tables) == list(TABLES)


def test_times_are_exact_to_the_nanosecond() -> None:
    one = made.stream("s01", "c01")
    one.started_ns = 1_700_000_000_123_456_789
    streams = build_tables(Assessment(captures=[], streams=[one]))["streams"]
    assert streams.started[0] == pd.Timestamp("2023-11-14T22:13:20.123456789Z")


def test_the_ssrc_is_written_in_hexadecimal_of_eight_digits(tables: dict[str, pd.DataFrame]) -> None:
    assert tables["streams"].ssrc[0] == "0x0000002a"


def test_ids_are_ordered_by_number_and_not_as_text() -> None:
    streams = [made.stream(f"s{number:02d}") for number in (100, 9, 99)]
    assert list(build_tables(Assessment(captures=[], streams=streams))["streams"].stream) == ["s09", "s99", "s100"]


def test_what_is_missing_is_no_zero_and_no_empty_text(tables: dict[str, pd.DataFrame]) -> None:
    first_call, first_stream = tables["calls"].iloc[0], tables["streams"].iloc[0]
    assert first_call.call_id is pd.NA
    assert first_call.status_code is pd.NA
    assert first_call.answered is pd.NaT
    assert np.isnan(first_call.setup_delay_s)
    assert first_stream.packets_discarded is pd.NA
    assert np.isnan(first_stream.burst_ratio)
    assert tables["streams"].call[4] is pd.NA


def test_a_zero_count_stays_zero(tables: dict[str, pd.DataFrame]) -> None:
    assert tables["streams"].packets_lost[0] == 0
    assert tables["streams"].sampling_rate_hz[4] == 0


def test_a_gap_keeps_stream_number_place_and_length(tables: dict[str, pd.DataFrame]) -> None:
    assert tables["gaps"].to_dict("records") == [
        {
            "stream": "s04",
            "first_missing": 65530,
            "packets_missing": 12,
            "at": pd.Timestamp("2023-11-14T22:14:22Z"),
            "duration_ms": 240.0,
            "after_s": 2.0,
        }
    ]


def test_gaps_are_in_order_of_time_within_each_stream() -> None:
    late_first = made.gaps((10, 1, made.BEGIN_NS + 5, 20.0, 0.0), (20, 1, made.BEGIN_NS + 3, 20.0, 0.0))
    streams = [made.stream("s02", gaps=made.gaps((7, 1, 0, 20.0, 0.0))), made.stream("s01", gaps=late_first)]
    frame = build_tables(Assessment(captures=[], streams=streams))["gaps"]
    assert list(frame.stream) == ["s01", "s01", "s02"]
    assert list(frame.first_missing) == [20, 10, 7]


def test_windows_of_streams_with_and_without_playout_stand_together() -> None:
    streams = [made.stream("s01", windows=made.windows(2)), made.stream("s02", windows=made.windows(1, discarded=True))]
    frame = build_tables(Assessment(captures=[], streams=streams))["windows"]
    assert list(frame.stream) == ["s01", "s01", "s02"]
    assert list(frame.from_s) == [0.0, 2.0, 0.0]
    assert list(frame.packets_discarded.isna()) == [True, True, False]
    assert frame.packets_discarded[2] == 3


def test_findings_are_ordered_by_call_then_stream_then_time() -> None:
    given = [
        made.row("findings", finding="duplicates", call="c02", stream="s03", from_s=1.0),
        made.row("findings", finding="capture-cut"),
        made.row("findings", finding="outage", call="c01", stream="s02", from_s=9.0),
        made.row("findings", finding="delay-spike", call="c01", stream="s02", from_s=2.0),
        made.row("findings", finding="one-way-media", call="c01"),
    ]
    frame = build_tables(Assessment(captures=[]), findings=given)["findings"]
    assert list(frame.finding) == ["delay-spike", "outage", "one-way-media", "duplicates", "capture-cut"]


def test_a_message_has_its_two_ends_and_its_time() -> None:
    given = [
        made.row("signalling", time_ns=made.BEGIN_NS + 1, call="c01", from_="192.0.2.1:5060", to="192.0.2.2:5060"),
        made.row("signalling", time_ns=made.BEGIN_NS, call="c01", from_="192.0.2.2:5060", to="192.0.2.1:5060"),
    ]
    frame = build_tables(Assessment(captures=[]), signalling=given)["signalling"]
    assert list(frame["from"]) == ["192.0.2.2:5060", "192.0.2.1:5060"]
    assert list(frame.time.astype("int64")) == [made.BEGIN_NS, made.BEGIN_NS + 1]


def test_yes_no_and_unknown_are_three_things() -> None:
    given = [made.row("signalling", time_ns=number, repeated=word) for number, word in enumerate([True, False, None])]
    frame = build_tables(Assessment(captures=[]), signalling=given)["signalling"]
    assert list(frame.repeated.isna()) == [False, False, True]
    assert bool(frame.repeated[0])
    assert not bool(frame.repeated[1])


def test_a_file_name_that_is_not_unicode_stays_writable() -> None:
    name = b"b\xfcro.pcap".decode("utf-8", "surrogateescape")
    streams = build_tables(Assessment(captures=[], streams=[made.stream("s01", capture=name)]))["streams"]
    assert streams.capture[0] == "b?ro.pcap"


def test_columns_of_several_audits_make_the_frames_of_each_one_after_the_other() -> None:
    audits = [
        Assessment(captures=[], streams=[made.stream("s01"), made.stream("s02")]),
        Assessment(captures=[]),
        Assessment(captures=[], streams=[made.stream("s01", source="192.0.2.9")]),
    ]
    parts = [table_columns(one) for one in audits]
    for table in TABLES:
        apart = [build_tables(one)[table] for one in audits]
        together = build_frame(table, [part[table] for part in parts])
        rows = [row for frame in apart for row in frame.astype(object).where(frame.notna(), None).values.tolist()]
        assert together.astype(object).where(together.notna(), None).values.tolist() == rows
        assert together.dtypes.to_list() == apart[0].dtypes.to_list()
