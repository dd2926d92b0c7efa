"""A run: what was done is not done again, and one capture's failure stays its own."""

from dataclasses import replace
from datetime import date
from pathlib import Path

import pytest

from rtpaudit import walk
from rtpaudit.nightly.batch import MOST_IN_PIECE
from rtpaudit.nightly.reading import read_night
from rtpaudit.nightly.sampling import Sampling
from rtpaudit.nightly.settings import PRIVATE
from rtpaudit.nightly.store import Store
from rtpaudit.nightly.worker import Piece
from tests.nightly.made import START_NS, call_octets, write_calls
from tests.nightly.runs import SETTINGS, InThisProcess, pending, rows, run


def test_a_second_run_has_nothing_to_do(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 3, 1.0)
    assert run(tmp_path / "store", [tmp_path / "in"]).calls == 3
    engine = InThisProcess()
    assert run(tmp_path / "store", [tmp_path / "in"], engine).captures == 0
    assert engine.seen == []
    assert len(rows(tmp_path / "store", "calls")) == 3


def test_a_renamed_capture_is_the_same(tmp_path: Path) -> None:
    (path,) = write_calls(tmp_path / "in", 1, 1.0)
    run(tmp_path / "store", [tmp_path / "in"])
    path.rename(path.with_name("renamed.pcap"))
    assert run(tmp_path / "store", [tmp_path / "in"]).known == 1
    assert run(tmp_path / "store", [tmp_path / "in"]).captures == 0
    assert len(rows(tmp_path / "store", "calls")) == 1


def test_two_copies_in_one_run_are_one(tmp_path: Path) -> None:
    (path,) = write_calls(tmp_path / "in", 1, 1.0)
    for name in ("copy.pcap", "other.pcap"):
        path.with_name(name).write_bytes(path.read_bytes())
    run(tmp_path / "store", [tmp_path / "in"])
    assert len(rows(tmp_path / "store", "calls")) == len(rows(tmp_path / "store", "captures")) == 1


def test_a_changed_capture_is_new(tmp_path: Path) -> None:
    (path,) = write_calls(tmp_path / "in", 1, 1.0)
    run(tmp_path / "store", [tmp_path / "in"])
    (other,) = write_calls(tmp_path / "elsewhere", 1, 1.0, first=7)
    path.write_bytes(other.read_bytes())
    assert run(tmp_path / "store", [tmp_path / "in"]).captures == 1
    assert len(rows(tmp_path / "store", "calls")) == 2


def test_what_cannot_be_read_is_a_row_with_its_reason(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 2, 1.0)
    (tmp_path / "in" / "cut.pcap").write_bytes(bytes.fromhex("d4c3b2a1 0200"))
    progress = run(tmp_path / "store", [tmp_path / "in"])
    assert (progress.captures_done, progress.failed, progress.calls) == (3, 1, 2)
    (failed,) = [row for row in rows(tmp_path / "store", "captures") if row["status"] == "failed"]
    assert failed["capture"] == "cut.pcap"
    assert failed["reason"].startswith("ends at offset 6")
    assert run(tmp_path / "store", [tmp_path / "in"]).captures == 0


@pytest.mark.parametrize("known", [True, False])
def test_a_capture_that_kills_its_worker_costs_itself_alone(tmp_path: Path, known: bool) -> None:
    """Whether the engine can tell which capture it was, or not; it is retried once, alone."""
    write_calls(tmp_path / "in", 40, 0.2)

    def lose(piece: Piece) -> int | None:
        names = [task.found.name for task in piece.tasks]
        if "call-00013.pcap" not in names:
            return None
        return names.index("call-00013.pcap") if known else -1

    engine = InThisProcess(lose=lose)
    progress = run(tmp_path / "store", [tmp_path / "in"], engine)
    assert (progress.captures_done, progress.failed, progress.retried) == (40, 1, 1)
    (failed,) = [row for row in rows(tmp_path / "store", "captures") if row["status"] == "failed"]
    assert (failed["capture"], failed["reason"]) == ("call-00013.pcap", "ended its worker process (SIGSEGV)")
    assert len(rows(tmp_path / "store", "calls")) == 39
    assert [len(piece.tasks) for piece in engine.seen if piece.retry] == [1]


def test_a_capture_that_kills_only_once_is_done_in_the_end(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 1, 0.2)
    progress = run(tmp_path / "store", [tmp_path / "in"], InThisProcess(lose=lambda piece: None if piece.retry else 0))
    assert (progress.failed, progress.retried, progress.calls) == (0, 1, 1)


def test_pieces_are_large_at_first_and_small_at_last(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 100, 0.1)
    engine = InThisProcess()
    run(tmp_path / "store", [tmp_path / "in"], engine)
    sizes = [len(piece.tasks) for piece in engine.seen]
    assert sizes[0] == min(100 // 8, MOST_IN_PIECE)
    assert sizes[-1] == 1


def test_what_is_done_when_a_run_is_interrupted_stays(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 20, 0.1)

    def lose(piece: Piece) -> int | None:
        if piece.number == 4:
            raise KeyboardInterrupt
        return None

    with pytest.raises(KeyboardInterrupt):
        run(tmp_path / "store", [tmp_path / "in"], InThisProcess(lose=lose))
    done = len(rows(tmp_path / "store", "calls"))
    assert 0 < done < 20
    assert not pending(tmp_path / "store")
    run(tmp_path / "store", [tmp_path / "in"])
    assert len(rows(tmp_path / "store", "calls")) == 20


def test_a_sample_is_drawn_once_and_goes_on_after_an_interruption(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 40, 0.1)
    share = Sampling(share=0.25, seed=3)

    def lose(piece: Piece) -> int | None:
        if piece.number == 3:
            raise KeyboardInterrupt
        return None

    with pytest.raises(KeyboardInterrupt):
        run(tmp_path / "store", [tmp_path / "in"], InThisProcess(lose=lose), sampling=share)
    run(tmp_path / "store", [tmp_path / "in"], sampling=share)
    assert run(tmp_path / "store", [tmp_path / "in"], sampling=share).captures == 0
    in_one_go = run(tmp_path / "other", [tmp_path / "in"], sampling=share)
    assert in_one_go.captures == 10
    names = {row["capture"] for row in rows(tmp_path / "other", "captures")}
    assert {row["capture"] for row in rows(tmp_path / "store", "captures")} == names


def test_what_a_sample_passed_over_is_audited_when_all_are_asked_for(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 8, 0.1)
    run(tmp_path / "store", [tmp_path / "in"], sampling=Sampling(share=0.5))
    run(tmp_path / "store", [tmp_path / "in"])
    assert len(rows(tmp_path / "store", "calls")) == 8


def test_a_capture_that_grows_while_it_is_read_is_left_for_the_next_run(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (path,) = write_calls(tmp_path / "in", 1, 1.0)
    original = walk.audit

    def audit(*paths: object, **given: object) -> object:
        found = original(*paths, **given)  # type: ignore[arg-type]
        path.write_bytes(path.read_bytes() + call_octets(9, 1.0)[24:])
        return found

    monkeypatch.setattr(walk, "audit", audit)
    progress = run(tmp_path / "store", [tmp_path / "in"])
    assert (progress.left, progress.calls) == (1, 0)
    assert rows(tmp_path / "store", "captures") == []
    monkeypatch.undo()
    assert run(tmp_path / "store", [tmp_path / "in"]).captures == 1
    assert len(rows(tmp_path / "store", "captures")) == 1


def test_another_profile_audits_anew_and_the_latest_audit_counts(tmp_path: Path) -> None:
    write_calls(tmp_path / "in", 2, 1.0, loss=0.1)
    run(tmp_path / "store", [tmp_path / "in"])
    other = replace(SETTINGS, profile_mark="q", delay_ms=400.0)
    run(tmp_path / "store", [tmp_path / "in"], InThisProcess(settings=other), other)
    assert len(rows(tmp_path / "store", "calls")) == 4
    night = read_night(Store.open(tmp_path / "store"), date(2026, 3, 1))
    assert night.calls["profile"].tolist() == ["q", "q"]
    assert len(night.captures) == 2
    latest = [row["r_factor"] for row in rows(tmp_path / "store", "calls") if row["profile"] == "q"]
    assert sorted(night.calls["r_factor"]) == sorted(latest)


def test_a_capture_over_noon_gives_each_call_to_its_night(tmp_path: Path) -> None:
    """Two calls in one capture, one before noon of 2 March and one after."""
    noon_ns = START_NS + 17 * 3_600_000_000_000
    (tmp_path / "in").mkdir()
    parts = [call_octets(k, 1.0, start_ns=noon_ns + side * 60_000_000_000) for k, side in enumerate((-1, 1))]
    (tmp_path / "in" / "a.pcap").write_bytes(parts[0] + parts[1][24:])
    run(tmp_path / "store", [tmp_path / "in"])
    store = Store.open(tmp_path / "store")
    assert [night.isoformat() for night in store.nights()] == ["2026-03-01", "2026-03-02"]
    assert [len(read_night(store, night).calls) for night in store.nights()] == [1, 1]
    assert [len(read_night(store, night).streams) for night in store.nights()] == [2, 2]


def test_in_private_even_a_capture_that_failed_has_no_name(tmp_path: Path) -> None:
    (tmp_path / "in").mkdir()
    (tmp_path / "in" / "01414960123.pcap").write_bytes(bytes.fromhex("d4c3b2a1"))
    private = replace(SETTINGS, names=PRIVATE)
    run(tmp_path / "store", [tmp_path / "in"], InThisProcess(settings=private), private)
    (row,) = rows(tmp_path / "store", "captures")
    assert row["status"] == "failed"
    assert row["capture"].startswith("capture-")
    assert "01414960123" not in str(row) + (tmp_path / "store" / "journal.jsonl").read_text()
