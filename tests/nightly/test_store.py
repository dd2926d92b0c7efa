"""The store: a batch counts whole or not at all, wherever it was stopped."""

import json
import os
import shutil
import stat
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from rtpaudit.errors import UnusableHistory, UnusableOutput
from rtpaudit.nightly import store as under_test
from rtpaudit.nightly.journal import DONE, Entry
from rtpaudit.nightly.rows import Facts, PieceRows
from rtpaudit.nightly.schema import SCHEMA_VERSION
from rtpaudit.nightly.store import Rows, Store
from tests.nightly.made import START_NS
from tests.nightly.runs import SETTINGS, UTC, pending, rows


def results(*captures: str) -> Rows:
    """Captures without calls."""
    made, piece = Rows(), PieceRows(SETTINGS, UTC)
    for capture in captures:
        piece.add(Facts(capture, f"{capture}.pcap", DONE, "", "", 10, START_NS, 0.1, START_NS, "1"), None)
    entries = [Entry(one, "p", DONE, 10, f"at {one}", "10 1", "1") for one in captures]
    made.add(entries, piece.finish())
    return made


def begun(folder: Path) -> Store:
    store = Store.open(folder, create=True)
    store.begin()
    return store


def captures_in(folder: Path) -> list[str]:
    return sorted(row["capture_id"] for row in rows(folder, "captures"))


def test_a_batch_lies_in_its_night_and_in_the_journal(tmp_path: Path) -> None:
    store = begun(tmp_path / "store")
    assert store.commit(results("a", "b")) == 2
    store.end()
    (path,) = (tmp_path / "store").glob("night=2026-03-01/captures-*.parquet")
    again = Store.open(tmp_path / "store")
    assert again.files("captures", again.nights()[0]) == [path]
    assert captures_in(tmp_path / "store") == ["a", "b"]
    assert not pending(tmp_path / "store")


def test_a_capture_is_committed_once(tmp_path: Path) -> None:
    store = begun(tmp_path / "store")
    both = results("a", "b")
    twice = results("b")
    both.add(twice.entries, {name: parts[0] for name, parts in twice.tables.items() if parts})
    assert [store.commit(results("a")), store.commit(both)] == [1, 1]
    assert captures_in(tmp_path / "store") == ["a", "b"]


def test_two_runs_at_once_commit_each_capture_once(tmp_path: Path) -> None:
    one, other = begun(tmp_path / "store"), begun(tmp_path / "store")
    assert one.others_at_work()
    assert [one.commit(results("a", "b")), other.commit(results("b", "c")), one.commit(results("c", "d"))] == [2, 1, 1]
    one.end()
    assert not other.others_at_work()
    other.end()
    assert captures_in(tmp_path / "store") == ["a", "b", "c", "d"]


STEPS = ["write_new", "make_folder", "append", "_move", "sync_folder"]


@pytest.mark.parametrize("step", STEPS)
@pytest.mark.parametrize("times", [0, 1])
def test_a_process_killed_at_any_step_leaves_all_of_a_batch_or_nothing(tmp_path: Path, step: str, times: int) -> None:
    """The process ends, as by kill -9, at a step of its second commit; the next one finishes it or does it again."""
    code = f"""
import os, sys
from pathlib import Path
from rtpaudit.nightly import journal, store as under_test
from tests.nightly.test_store import begun, results
folder, left = Path(sys.argv[1]), [{times}]
store = begun(folder)
store.commit(results("a"))
place = journal.Journal if "{step}" == "append" else under_test
original = getattr(place, "{step}")
def killed(*given, **named):
    if not left[0]:
        os._exit(9)
    left[0] -= 1
    return original(*given, **named)
setattr(place, "{step}", killed)
store.commit(results("b", "c"))
"""
    folder = tmp_path / "store"
    subprocess.run([sys.executable, "-c", code, str(folder)], check=False, cwd=Path(__file__).parents[2])
    store = Store.open(folder)
    assert not pending(folder)
    assert captures_in(folder) in (["a"], ["a", "b", "c"])
    assert store.known.has("b", "p") == (len(captures_in(folder)) == 3)
    store.begin()
    store.commit(results("b", "c"))
    store.end()
    assert captures_in(folder) == ["a", "b", "c"]


def test_what_a_living_run_has_pending_is_left_alone(tmp_path: Path) -> None:
    store = begun(tmp_path / "store")
    there = pending(tmp_path / "store")
    Store.open(tmp_path / "store")
    assert pending(tmp_path / "store") == there
    store.commit(results("a"))
    store.end()


def test_all_files_are_the_owners_only(tmp_path: Path) -> None:
    store = begun(tmp_path / "store")
    store.commit(results("a"))
    store.end()
    for path in [tmp_path / "store", *(tmp_path / "store").rglob("*")]:
        assert stat.S_IMODE(path.stat().st_mode) == (0o700 if path.is_dir() else 0o600), path


def test_a_disk_that_refuses_leaves_the_store_as_it_was(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    store = begun(tmp_path / "store")
    store.commit(results("a"))
    before = (tmp_path / "store" / "journal.jsonl").read_bytes()

    def full(handle: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(UnusableOutput, match="the disk is full"):
        store.commit(results("b"))
    monkeypatch.undo()
    assert (tmp_path / "store" / "journal.jsonl").read_bytes() == before
    assert captures_in(tmp_path / "store") == ["a"]
    store.commit(results("b"))
    store.end()
    assert captures_in(tmp_path / "store") == ["a", "b"]


@pytest.fixture
def small_disk(tmp_path: Path) -> Any:
    place = tmp_path / "disk"
    place.mkdir()
    if os.geteuid() != 0 or not shutil.which("mount"):
        pytest.skip("mounting a small disk takes root")
    if subprocess.run(["mount", "-t", "tmpfs", "-o", "size=256k", "tmpfs", place], check=False).returncode:
        pytest.skip("no tmpfs can be mounted here")
    yield place
    subprocess.run(["umount", "--lazy", place], check=True)


def test_a_full_disk_is_one_sentence_and_leaves_a_store_that_goes_on(small_disk: Path) -> None:
    store = begun(small_disk / "store")
    done: list[int] = []

    def fill() -> None:
        for number in range(1000):
            store.commit(results(*(f"{number}-{k}" for k in range(50))))
            done.append(50)

    with pytest.raises(UnusableOutput, match="the disk is full"):
        fill()
    store.end()
    assert done
    assert len(captures_in(small_disk / "store")) == sum(done)
    again = Store.open(small_disk / "store")
    assert len(again.known.latest) == sum(done)


@pytest.mark.parametrize(
    ("about", "said"),
    [
        ({"schema_version": SCHEMA_VERSION + 1}, "use a newer rtpaudit"),
        ({"schema_version": "one"}, "has schema version one"),
        ({"schema": "something else"}, "is damaged"),
    ],
)
def test_another_version_is_refused_in_one_sentence(tmp_path: Path, about: dict[str, Any], said: str) -> None:
    Store.open(tmp_path / "store", create=True)
    path = tmp_path / "store" / "store.json"
    path.write_text(json.dumps(json.loads(path.read_text()) | about))
    with pytest.raises(UnusableHistory, match=said):
        Store.open(tmp_path / "store")


def test_a_folder_of_something_else_is_refused(tmp_path: Path) -> None:
    (tmp_path / "letter.txt").write_text("Dear Sir or Madam")
    for create in (False, True):
        with pytest.raises(UnusableHistory, match="no store of nights"):
            Store.open(tmp_path, create=create)


def test_the_steps_that_are_killed_at_exist() -> None:
    assert all(hasattr(under_test, step) or step == "append" for step in STEPS)
