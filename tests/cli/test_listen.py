import json
from pathlib import Path
from typing import Any

import pytest

from rtpaudit.cli import DONE, UNUSABLE, main
from tests.journeys.conftest import CAPTURES
from tests.listen.captures import capture, voice
from tests.listen.ratings import VOTES, write_check


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    (tmp_path / "call.pcap").write_bytes(capture(voice(30.0), voice(30.0, "guest"), lost=[(15.0, 15.3)]))
    (tmp_path / "diary").mkdir()
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_without_out_the_folder_is_named_after_the_capture(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["listen", "call.pcap", "--clips", "2", "--quiet"]) == DONE
    assert (here / "call-listening" / "listeners" / "rating-sheet.html").exists()
    assert capsys.readouterr().out == ""


def test_the_summary_comes_as_json(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["listen", "call.pcap", "--clips", "2", "--json", "--seed", "7"]) == DONE
    summary = json.loads(capsys.readouterr().out)
    assert summary["schema"] == "rtpaudit listening check"
    assert {one["kind"] for one in summary["clips"]} == {"worst", "anchor"}
    assert json.loads((here / "call-listening" / "listening.json").read_bytes())["seed"] == 7


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["call.pcap", "--private"], "listen writes sound, which --private leaves out"),
        (["call.pcap", "--clips", "0"], "--clips 0 is not within 1 to 100"),
        (["call.pcap", "--clips", "101"], "--clips 101"),
        (["call.pcap", "--key", "key.csv"], "--key goes with --ratings"),
        (["call.pcap", "--out", "diary"], "diary: is there and was not written by rtpaudit"),
        (["call.pcap", "--zone", "Nowhere"], "--zone 'Nowhere'"),
        (["missing.pcap"], "missing.pcap"),
        (["--ratings", "missing.csv"], "missing.csv: cannot be read"),
        (["--ratings", "call.pcap"], "call.pcap: is no file of ratings"),
        (["--ratings", "call.pcap", "--out", "diary"], "diary: is there and was not written by rtpaudit"),
        ([str(CAPTURES / "srtp-sdes.b.pcap")], "encrypted"),
        ([str(CAPTURES / "busy-486.a.pcap")], "no stream of RTP was found"),
    ],
)
def test_what_cannot_be_is_one_line(
    here: Path, capsys: pytest.CaptureFixture[str], arguments: list[str], said: str
) -> None:
    assert main(["listen", *arguments]) == UNUSABLE
    output = capsys.readouterr()
    assert output.out == ""
    assert output.err.count("\n") == 1
    assert said in output.err


def test_ratings_need_no_capture(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    files = write_check(tmp_path)
    assert main(["listen", "--ratings", *map(str, files)]) == DONE
    assert "3 listeners, 4 clips, 12 votes" in capsys.readouterr().out
    assert (tmp_path / "listening-outcome" / "index.html").exists()


def test_the_outcome_comes_as_json_without_names_where_it_is_private(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    files = write_check(tmp_path)
    assert main(["listen", "--ratings", *map(str, files), "--json", "--private"]) == DONE
    summary: dict[str, Any] = json.loads(capsys.readouterr().out)
    assert summary["schema"] == "rtpaudit listening outcome"
    assert len(summary["opinions"]) == 4
    assert not any(name in json.dumps(summary) for name in VOTES)
