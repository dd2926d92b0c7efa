"""Triage of real captures, read back as a user would."""

import csv
import json
import subprocess
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
import soundfile

from rtpaudit.columns import TABLES
from tests.journeys.conftest import CAPTURES, Command

LOSSY = "loss3-random.b"
TRUTH = json.loads((CAPTURES / f"{LOSSY}.truth.json").read_text())


@pytest.fixture(scope="module")
def done(command: Command) -> subprocess.CompletedProcess[str]:
    return command("triage", CAPTURES / TRUTH["file"], "--zone", "UTC", "--out", "lossy")


@pytest.fixture(scope="module")
def folder(place: Path, done: subprocess.CompletedProcess[str]) -> Path:
    assert done.returncode == 0, done.stderr
    return place / "lossy"


@pytest.fixture(scope="module")
def document(folder: Path) -> dict[str, Any]:
    return json.loads((folder / "audit.json").read_bytes())


def test_the_summary_names_the_call_and_what_each_ear_got(done: subprocess.CompletedProcess[str]) -> None:
    assert "c01" in done.stdout
    assert "caller hears  R " in done.stdout
    assert "callee hears  R " in done.stdout
    assert " % lost" in done.stdout
    assert all(len(line) <= 80 for line in done.stdout.splitlines())


def test_the_losses_are_those_that_were_counted_with_another_reader(document: dict[str, Any]) -> None:
    lost = {one["ssrc"]: one["lost"] for one in TRUTH["streams"]}
    assert {row["ssrc"]: row["packets_lost"] for row in document["streams"]} == lost


def test_csv_parquet_and_document_tell_the_same(folder: Path, document: dict[str, Any]) -> None:
    for table, columns in TABLES.items():
        frame = pd.read_parquet(folder / f"{table}.parquet")
        with open(folder / f"{table}.csv", newline="", encoding="utf-8") as file:
            rows = list(csv.reader(file, strict=True))
        assert rows[0] == list(frame.columns) == [column.name for column in columns]
        assert len(rows) - 1 == len(frame) == len(document[table])


def test_gaps_and_windows_add_up_to_the_streams(folder: Path) -> None:
    streams = pd.read_parquet(folder / "streams.parquet").set_index("stream")
    gaps = pd.read_parquet(folder / "gaps.parquet").groupby("stream")
    windows = pd.read_parquet(folder / "windows.parquet").groupby("stream")
    lossy = streams[streams.packets_lost > 0]
    assert len(lossy)
    assert gaps.packets_missing.sum().to_dict() == lossy.packets_lost.to_dict()
    assert gaps.size().to_dict() == lossy.sequence_gaps.to_dict()
    assert windows.packets_lost.sum().to_dict() == streams.packets_lost.to_dict()
    assert windows.packets_expected.sum().to_dict() == streams.packets_expected.to_dict()


def test_each_direction_and_the_call_can_be_played(folder: Path, document: dict[str, Any]) -> None:
    for row in document["streams"]:
        sound = soundfile.info(folder / "audio" / f"{row['call']}-{row['stream']}-sent.wav")
        assert (sound.samplerate, sound.channels, sound.subtype) == (row["sampling_rate_hz"], 1, "PCM_16")
        assert sound.duration == pytest.approx(row["duration_s"], abs=0.5)
    call = soundfile.info(folder / "audio" / "c01.wav")
    assert (call.channels, call.subtype) == (2, "PCM_16")


def test_a_limit_above_the_rating_ends_with_1(command: Command) -> None:
    result = command("triage", CAPTURES / TRUTH["file"], "--out", "limit", "--quiet", "--fail-below", "100")
    assert result.returncode == 1
    assert result.stderr.startswith("rtpaudit: rated below R 100: c01 (")


def test_a_limit_below_the_rating_ends_with_0(command: Command) -> None:
    assert command("triage", CAPTURES / TRUTH["file"], "--out", "limit", "--quiet", "--fail-below", "1").returncode == 0


def test_the_same_capture_on_standard_input_gives_the_same_streams(command: Command, folder: Path, place: Path) -> None:
    result = command("triage", "-", "--quiet", stdin=(CAPTURES / TRUTH["file"]).read_bytes())
    assert result.returncode == 0, result.stderr
    piped = pd.read_parquet(place / "stdin-audit" / "streams.parquet").drop(columns="capture")
    pd.testing.assert_frame_equal(piped, pd.read_parquet(folder / "streams.parquet").drop(columns="capture"))


def test_a_cut_capture_tells_what_it_can_and_where_it_broke(command: Command, place: Path) -> None:
    octets = (CAPTURES / TRUTH["file"]).read_bytes()
    (place / "cut.pcap").write_bytes(octets[: len(octets) // 2 + 7])
    result = command("triage", "cut.pcap", "--json")
    assert result.returncode == 0, result.stderr
    summary = json.loads(result.stdout)
    assert summary["streams"] == len(TRUTH["streams"])
    assert [row["capture"] for row in summary["damage"]] == ["cut.pcap"]


@pytest.mark.parametrize(
    ("name", "octets"),
    [("empty.pcap", b""), ("letter.pcap", b"Dear Sir or Madam,\n" * 100), ("zeros.pcap", bytes(500))],
)
def test_what_is_no_capture_is_one_line_with_its_name(command: Command, place: Path, name: str, octets: bytes) -> None:
    (place / name).write_bytes(octets)
    result = command("triage", name)
    assert result.returncode == 2
    assert result.stdout == ""
    assert result.stderr.count("\n") == 1
    assert name in result.stderr
    assert not (place / f"{Path(name).stem}-audit").exists()


def test_a_capture_that_is_not_there_is_one_line_with_its_name(command: Command) -> None:
    result = command("triage", "missing.pcap")
    assert result.returncode == 2
    assert result.stderr.count("\n") == 1
    assert "missing.pcap" in result.stderr


def test_a_capture_without_rtp_is_done_and_said_so(command: Command) -> None:
    result = command("triage", CAPTURES / "no-rtp-quic-over-ppp.pcap", "--out", "quic")
    assert result.returncode == 0, result.stderr
    assert "no stream of RTP was found" in result.stdout


def test_a_private_report_names_no_address_and_no_file_anywhere(command: Command, place: Path, folder: Path) -> None:
    result = command("triage", CAPTURES / TRUTH["file"], "--private", "--out", "private")
    assert result.returncode == 0, result.stderr
    streams = pd.read_parquet(folder / "streams.parquet")
    secrets = {*streams.source, *streams.destination, LOSSY}
    written = [path.read_bytes() for path in (place / "private").rglob("*.csv")]
    written += [(place / "private" / "audit.json").read_bytes(), result.stdout.encode()]
    for secret in secrets:
        assert not any(secret.encode() in octets for octets in written), secret
    assert not list((place / "private").rglob("*.wav"))


def test_figures_only_leaves_the_sound_alone(command: Command, place: Path) -> None:
    result = command("triage", str(CAPTURES / TRUTH["file"]), "--figures-only", "--quiet", "--out", "bare")
    assert result.returncode == 0, result.stderr
    streams = pd.read_parquet(place / "bare" / "streams.parquet")
    assert len(streams) == len(TRUTH["streams"])
    assert streams.speech_level_dbov.isna().all()
    assert not list((place / "bare").rglob("*.wav"))
