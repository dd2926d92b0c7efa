"""audit.json: one document with everything in it, by a schema version."""

import json
from typing import Any

import pytest

from rtpaudit.columns import TABLES
from rtpaudit.profile import Playout, Profile, Route
from rtpaudit.report.document import OPENING, SCHEMA, SCHEMA_VERSION, document, profile_of
from rtpaudit.report.tables import build_tables
from tests.report import made


@pytest.fixture
def read() -> dict[str, Any]:
    tables = build_tables(made.assessment())
    written = document(tables, ["complaint.pcap"], profile_of(Profile(), private=False), ["mind the law"])
    return json.loads(b"".join(written))


def test_the_schema_stands_first(read: dict[str, Any]) -> None:
    assert list(read)[:2] == ["schema", "schema_version"]
    assert read["schema"] == SCHEMA
    assert read["schema_version"] == SCHEMA_VERSION
    assert OPENING.startswith(b"{")


def test_every_table_is_in_it_row_by_row(read: dict[str, Any]) -> None:
    for table, columns in TABLES.items():
        for row in read[table]:
            assert list(row) == [column.name for column in columns]
    assert [row["call"] for row in read["calls"]] == ["c01", "c02"]
    assert [row["packets_missing"] for row in read["gaps"]] == [12]
    assert len(read["windows"]) == 10
    assert read["findings"] == []


def test_it_says_what_was_set_and_what_to_mind(read: dict[str, Any]) -> None:
    assert read["captures"] == ["complaint.pcap"]
    assert read["profile"]["playout"]["nominal_ms"] == 60
    assert read["profile"]["network"]["delay_ms"] is None
    assert read["cautions"] == ["mind the law"]


def test_a_changed_profile_is_told() -> None:
    assert profile_of(Profile(playout=Playout(nominal_ms=80)), private=False)["playout"]["nominal_ms"] == 80


def test_routes_name_parties_and_stay_out_of_a_private_report() -> None:
    profile = Profile(routes=(Route("ferry", numbers=("+441632",)),))
    assert profile_of(profile, private=False)["routes"][0]["numbers"] == ("+441632",)
    assert "routes" not in profile_of(profile, private=True)
