"""Columns: names carry their units, and each column says what it means and how it is known."""

import pytest

from rtpaudit.columns import TABLES, unit_of

ALL = [(table, column) for table, columns in TABLES.items() for column in columns]


@pytest.mark.parametrize(("name", "unit"), [
    ("jitter_ms", "ms"),
    ("duration_s", "s"),
    ("clock_rate_hz", "Hz"),
    ("loss_pct", "%"),
    ("clock_skew_ppm", "ppm"),
    ("speech_level_dbov", "dBov"),
    ("level_dbm0", "dBm0"),
    ("longest_gap_packets", "packets"),
    ("packets_lost", "packets"),
    ("r_factor", ""),
    ("ssrc", ""),
    ("streams", ""),
])  # fmt: skip
def test_a_name_ends_in_its_unit(name: str, unit: str) -> None:
    assert unit_of(name) == unit


def test_no_table_has_a_column_twice() -> None:
    for columns in TABLES.values():
        names = [column.name for column in columns]
        assert len(names) == len(set(names))


@pytest.mark.parametrize(("table", "column"), ALL, ids=[f"{table}.{column.name}" for table, column in ALL])
def test_each_column_says_what_it_means_and_where_it_comes_from(table: str, column) -> None:
    assert column.meaning.endswith("."), "a sentence"
    assert column.meaning[0].isupper()
    assert column.source.strip()
    assert column.source != column.meaning


@pytest.mark.parametrize(("table", "column"), ALL, ids=[f"{table}.{column.name}" for table, column in ALL])
def test_what_has_a_unit_is_a_number(table: str, column) -> None:
    if column.unit:
        assert column.kind in ("number", "count", "time")
