"""Retention: names, reports and sound before figures."""

from datetime import date, timedelta
from pathlib import Path

import pytest

from rtpaudit.errors import UnusableArguments
from rtpaudit.nightly.retention import NAMING, Retention, parse_keep, retire
from rtpaudit.nightly.schema import STORED
from rtpaudit.nightly.store import Store
from tests.nightly.made import START_NS, write_calls
from tests.nightly.runs import rows, run

NIGHT = date(2026, 3, 1)
DAY_NS = 86_400_000_000_000


@pytest.fixture
def store(tmp_path: Path) -> Store:
    write_calls(tmp_path / "in", 2, 1.0, loss=0.1)
    run(tmp_path / "store", [tmp_path / "in"])
    report = tmp_path / "store" / "night=2026-03-01" / "calls" / "abc-c01" / "audio"
    report.mkdir(parents=True)
    (report / "c01.wav").write_bytes(b"RIFF")
    (report.parents[2] / "index.html").write_text("page")
    return Store.open(tmp_path / "store")


@pytest.mark.parametrize(("text", "days"), [("30d", 30), ("4w", 28), ("7", 7), (" 1d ", 1)])
def test_a_time_is_written_as_people_do(text: str, days: int) -> None:
    assert parse_keep(text) == days


@pytest.mark.parametrize("text", ["", "0d", "-3d", "a month", "30m", "1.5d"])
def test_a_time_that_is_none_is_refused(text: str) -> None:
    with pytest.raises(UnusableArguments, match="--keep"):
        parse_keep(text)


def test_before_its_time_all_stays(store: Store) -> None:
    assert retire(store, Retention(30, 400), NIGHT + timedelta(days=30)) == []
    assert rows(store.folder, "calls")[0]["caller"]
    assert (store.night_folder(NIGHT) / "calls").is_dir()


def test_names_reports_and_sound_go_first_and_figures_stay(store: Store) -> None:
    before = rows(store.folder, "calls")
    assert retire(store, Retention(30, 400), NIGHT + timedelta(days=31)) == [NIGHT]
    assert not list(store.folder.rglob("*.wav"))
    assert not (store.night_folder(NIGHT) / "index.html").exists()
    for table, columns in NAMING.items():
        assert all(row[column] is None for row in rows(store.folder, table) for column in columns), table
    kept = [name for name, _ in STORED["calls"] if name not in NAMING["calls"]]
    assert [[row[name] for name in kept] for row in rows(store.folder, "calls")] == [
        [row[name] for name in kept] for row in before
    ]
    assert retire(store, Retention(30, 400), NIGHT + timedelta(days=32)) == []


def test_what_comes_late_to_an_old_night_goes_with_the_next_run(store: Store, tmp_path: Path) -> None:
    retire(store, Retention(30), NIGHT + timedelta(days=31))
    write_calls(tmp_path / "in", 1, 1.0, first=50)
    run(tmp_path / "store", [tmp_path / "in"])
    again = Store.open(tmp_path / "store")
    assert any(row["caller"] for row in rows(store.folder, "calls"))
    assert retire(again, Retention(30), NIGHT + timedelta(days=31)) == [NIGHT]
    assert not any(row["caller"] for row in rows(store.folder, "calls"))


def test_a_night_goes_as_a_whole_at_last_and_is_not_audited_again(store: Store, tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 1, 1.0, first=60, start_ns=START_NS + 5 * DAY_NS)
    run(tmp_path / "store", [tmp_path / "in"])
    again = Store.open(tmp_path / "store")
    assert retire(again, Retention(figures=3), NIGHT + timedelta(days=5)) == [NIGHT]
    assert Store.open(tmp_path / "store").nights() == [NIGHT + timedelta(days=5)]
    assert run(tmp_path / "store", [tmp_path / "in"]).captures == 0


def test_every_column_that_names_somebody_is_one_that_is_stored() -> None:
    for table, columns in NAMING.items():
        assert set(columns) <= {name for name, _ in STORED[table]}
