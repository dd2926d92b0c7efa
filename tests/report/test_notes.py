"""The notes behind terms: the same words as in the tables and the catalogue."""

from rtpaudit.columns import STREAMS
from rtpaudit.findings.rule import CATALOGUE
from rtpaudit.report.notes import MEDIA_FACTS, notes

COLUMNS = {column.name: column for column in STREAMS}


def test_every_media_fact_is_a_column_and_says_what_the_column_says() -> None:
    for group in notes()["facts"]:
        for row in group["rows"]:
            column = COLUMNS[row["name"]]
            assert row["note"] == f"{column.meaning} Source: {column.source}."
            assert (row["kind"], row["unit"]) == (column.kind, column.unit)


def test_no_figure_stands_with_its_largest_value_beside_its_mean() -> None:
    shown = {name for columns in MEDIA_FACTS.values() for name in columns}
    assert not {name for name in shown if "_max" in name or "_last" in name}
    assert len({name for name in shown if name.startswith("pdv_")}) == 1


def test_every_finding_of_the_catalogue_has_its_page() -> None:
    told = notes()["findings"]
    assert set(told) == set(CATALOGUE)
    assert all(one["means"] and one["measured_as"] and one["basis"] for one in told.values())
