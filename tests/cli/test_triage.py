"""Triage: what goes to the walk, what is said, what is written and which status comes back."""

import json
from pathlib import Path

import pytest

from rtpaudit.report.folder import write_folder
from tests.cli.conftest import Run
from tests.report import made


def test_it_writes_the_folder_and_says_where(run: Run, tmp_path: Path) -> None:
    result = run("triage", "complaint.pcap")
    assert result.status == 0
    assert (tmp_path / "complaint-audit" / "audit.json").exists()
    assert "complaint-audit" in result.out
    assert result.err == ""


def test_what_the_user_knows_reaches_the_walk(run: Run, tmp_path: Path) -> None:
    (tmp_path / "p.toml").write_text("[playout]\nnominal_ms = 80\n")
    result = run(
        "triage", "a.pcap", "b.pcap", "--payload-type", "96=G722/8000", "--payload-type", "97=opus/48000/2",
        "--delay", "40", "--profile", "p.toml",
    )  # fmt: skip
    captures, profile, payload_types, delay = result.asked[:4]
    assert list(captures) == ["a.pcap", "b.pcap"]
    assert profile.playout.nominal_ms == 80
    assert sorted(payload_types) == [96, 97]
    assert delay == 40.0


def test_a_call_below_the_limit_is_status_1_and_named(run: Run) -> None:
    result = run("triage", "a.pcap", "--fail-below", "70")
    assert result.status == 1
    assert result.err == "rtpaudit: rated below R 70: c02 (61)\n"


@pytest.mark.parametrize("limit", ["61", "0"])
def test_a_call_at_the_limit_does_not_break_it(limit: str, run: Run) -> None:
    result = run("triage", "a.pcap", "--fail-below", limit)
    assert result.status == 0
    assert result.err == ""


def test_a_call_without_a_rating_breaks_no_limit(run: Run) -> None:
    found = made.assessment()
    found.calls[1].figures.r_factor = float("nan")
    assert run("triage", "a.pcap", "--fail-below", "70", found=made.Audited(found)).status == 0


def test_json_is_all_there_is_on_standard_output(run: Run, tmp_path: Path) -> None:
    result = run("triage", "a.pcap", "--json", "--out", "out", "--fail-below", "70")
    summary = json.loads(result.out)
    assert result.status == 1
    assert [call["call"] for call in summary["calls"]] == ["c02", "c01"]
    assert summary["below"] == ["c02"]
    assert summary["captures"] == ["complaint.pcap"]
    assert summary["audio_files"] == 10
    assert summary["damage"][0]["offset"] == 4242
    assert summary["folder"] == "out"
    assert (tmp_path / "out").exists()


def test_quiet_says_nothing_but_what_broke(run: Run, tmp_path: Path) -> None:
    result = run("triage", "a.pcap", "--quiet")
    assert result.out == result.err == ""
    assert (tmp_path / "a-audit").exists()
    assert run("triage", "a.pcap", "--quiet", "--fail-below", "70").err.count("\n") == 1


def test_a_private_report_and_its_summary_name_the_same_pseudonyms(run: Run, tmp_path: Path) -> None:
    result = run("triage", "a.pcap", "--private", "--out", "out")
    document = json.loads((tmp_path / "out" / "audit.json").read_bytes())
    assert document["calls"][0]["caller"] in result.out
    for secret in ("192.0.2.10", "198.51.100.20", "2001:db8", "complaint.pcap"):
        assert secret not in result.out
    assert not list(tmp_path.rglob("*.wav"))


def test_a_private_summary_in_json_names_nobody(run: Run) -> None:
    result = run("triage", "a.pcap", "--private", "--json")
    for secret in ("192.0.2.10", "198.51.100.20", "2001:db8", "complaint.pcap"):
        assert secret not in result.out


def test_a_foreign_folder_is_refused_before_anything_is_read(run: Run, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "letter.txt").write_text("dear")
    result = run("triage", "a.pcap", "--out", "out")
    assert result.status == 2
    assert result.asked == []
    assert (tmp_path / "out" / "letter.txt").read_text() == "dear"


def test_our_own_folder_is_replaced(run: Run, tmp_path: Path) -> None:
    write_folder(made.Audited(), tmp_path / "out")
    assert run("triage", "a.pcap", "--out", "out", "--private").status == 0
    assert not (tmp_path / "out" / "audio").exists()


def test_the_demo_is_triage_of_the_capture_that_ships(run: Run, tmp_path: Path) -> None:
    result = run("demo")
    assert result.status == 0
    assert [Path(capture).name for capture in result.asked[0]] == ["demo.pcap"]
    assert (tmp_path / "demo-audit" / "audit.json").exists()
    assert json.loads(run("demo", "--json", "--out", "other").out)["folder"] == "other"
