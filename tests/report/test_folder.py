"""The report folder: whole or not at all, and never over what somebody else put there."""

import csv
import json
import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from rtpaudit.columns import TABLES
from rtpaudit.errors import UnusableOutput
from rtpaudit.report import folder
from rtpaudit.report.folder import new_folder, refuse_foreign, write_folder
from tests.report.made import Audited


def everything(place: Path) -> dict[str, bytes]:
    return {str(path.relative_to(place)): path.read_bytes() for path in sorted(place.rglob("*")) if path.is_file()}


def break_off(place: Path, interruption: type[BaseException]) -> None:
    with new_folder(place) as partial:
        (partial / "audit.json").write_text("half")
        raise interruption


def test_it_holds_each_table_twice_the_document_and_the_sound(tmp_path: Path) -> None:
    written = write_folder(Audited(), tmp_path / "out")
    tables = {f"{table}.{kind}" for table in TABLES for kind in ("csv", "parquet")}
    sound = {"c01.wav", "c02.wav"}
    for stream in ("c01-s01", "c01-s02", "c02-s03", "c02-s04"):
        sound |= {f"{stream}-sent.wav", f"{stream}-heard.wav"}
    assert set(everything(tmp_path / "out")) == tables | {"audit.json", "index.html"} | {
        f"audio/{name}" for name in sound
    }
    assert written.audio_files == 10


def test_nothing_else_is_left_beside_it(tmp_path: Path) -> None:
    write_folder(Audited(), tmp_path / "out")
    write_folder(Audited(), tmp_path / "out")
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


@pytest.mark.parametrize("table", TABLES)
def test_parquet_brings_back_every_value_and_kind(table: str, tmp_path: Path) -> None:
    audit = Audited()
    write_folder(audit, tmp_path / "out", audio=False)
    pd.testing.assert_frame_equal(pd.read_parquet(tmp_path / "out" / f"{table}.parquet"), audit.tables[table])


def test_csv_and_document_agree(tmp_path: Path) -> None:
    write_folder(Audited(), tmp_path / "out", audio=False)
    with open(tmp_path / "out" / "streams.csv", newline="", encoding="utf-8") as file:
        losses = [row["packets_lost"] for row in csv.DictReader(file)]
    document = json.loads((tmp_path / "out" / "audit.json").read_bytes())
    assert losses == [str(row["packets_lost"]) for row in document["streams"]] == ["0", "0", "0", "12", "0"]


def test_without_audio_there_is_no_sound(tmp_path: Path) -> None:
    written = write_folder(Audited(), tmp_path / "out", audio=False)
    assert written.audio_files == 0
    assert not list((tmp_path / "out").rglob("*.wav"))


def test_a_private_folder_has_no_sound_and_names_nobody_anywhere(tmp_path: Path) -> None:
    written = write_folder(Audited(), tmp_path / "out", private=True)
    assert not list((tmp_path / "out").rglob("*.wav"))
    for name, octets in everything(tmp_path / "out").items():
        for secret in (b"192.0.2.10", b"198.51.100.20", b"2001:db8::10", b"complaint"):
            assert secret not in octets, name
    parquet = pd.concat([pd.read_parquet(tmp_path / "out" / f"{table}.parquet").astype("string") for table in TABLES])
    assert not parquet.apply(lambda column: column.str.contains("192.0.2|2001:db8|complaint")).any(axis=None)
    assert written.tables["calls"].caller[0].startswith("host-")
    assert written.captures == ["capture-1"]


def test_our_own_folder_is_replaced_as_a_whole(tmp_path: Path) -> None:
    write_folder(Audited(), tmp_path / "out")
    (tmp_path / "out" / "notes.txt").write_text("old")
    write_folder(Audited(), tmp_path / "out", audio=False)
    assert "notes.txt" not in everything(tmp_path / "out")
    assert "audio/c01.wav" not in everything(tmp_path / "out")


@pytest.mark.parametrize(
    "files", [{}, {"letter.txt": "dear"}, {"audit.json": '{"schema": "another"}'}, {"audit.json": ""}],
    ids=["empty", "letter", "another schema", "empty document"],
)  # fmt: skip
def test_any_other_folder_is_refused_and_stays(tmp_path: Path, files: dict[str, str]) -> None:
    place = tmp_path / "out"
    place.mkdir()
    for name, text in files.items():
        (place / name).write_text(text)
    with pytest.raises(UnusableOutput, match=r"out: is there and was not written by rtpaudit; choose another --out"):
        write_folder(Audited(), place)
    assert everything(place) == {name: text.encode() for name, text in files.items()}
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_a_file_in_its_place_is_refused(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("mine")
    with pytest.raises(UnusableOutput):
        refuse_foreign(tmp_path / "out")


def test_a_link_to_nowhere_is_refused(tmp_path: Path) -> None:
    (tmp_path / "out").symlink_to(tmp_path / "nowhere")
    with pytest.raises(UnusableOutput):
        refuse_foreign(tmp_path / "out")


def test_a_link_to_a_folder_of_ours_stays_a_link(tmp_path: Path) -> None:
    write_folder(Audited(), tmp_path / "disk" / "out", audio=False)
    (tmp_path / "out").symlink_to(tmp_path / "disk" / "out")
    write_folder(Audited(), tmp_path / "out", audio=False)
    assert (tmp_path / "out").is_symlink()
    assert (tmp_path / "disk" / "out" / "audit.json").exists()


def test_a_free_place_is_not_refused(tmp_path: Path) -> None:
    refuse_foreign(tmp_path / "a" / "b")
    write_folder(Audited(), tmp_path / "a" / "b", audio=False)
    assert (tmp_path / "a" / "b" / "audit.json").exists()


@pytest.mark.parametrize("interruption", [KeyboardInterrupt, SystemExit, ValueError])
def test_an_interrupted_run_leaves_nothing(tmp_path: Path, interruption: type[BaseException]) -> None:
    with pytest.raises(interruption):
        break_off(tmp_path / "out", interruption)
    assert list(tmp_path.iterdir()) == []


def test_an_interrupted_run_leaves_the_earlier_report_as_it_was(tmp_path: Path) -> None:
    write_folder(Audited(), tmp_path / "out", audio=False)
    before = everything(tmp_path / "out")
    with pytest.raises(KeyboardInterrupt):
        break_off(tmp_path / "out", KeyboardInterrupt)
    assert everything(tmp_path / "out") == before
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_where_the_last_rename_fails_the_earlier_report_comes_back(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    write_folder(Audited(), tmp_path / "out", audio=False)
    before = everything(tmp_path / "out")
    rename = Path.rename

    def fail_for_the_new_one(self: Path, target: Path) -> Path:
        if ".partial-" in self.name:
            raise OSError(28, "No space left on device")
        return rename(self, target)

    monkeypatch.setattr(Path, "rename", fail_for_the_new_one)
    with pytest.raises(UnusableOutput, match="No space left on device"):
        write_folder(Audited(), tmp_path / "out", audio=False)
    assert everything(tmp_path / "out") == before
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_a_place_that_cannot_be_written_is_one_sentence(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(UnusableOutput, match="cannot be written: Not a directory"):
        write_folder(Audited(), tmp_path / "file" / "out")


def test_what_appeared_while_we_worked_is_not_replaced(tmp_path: Path) -> None:
    with pytest.raises(UnusableOutput, match="not written by rtpaudit"), new_folder(tmp_path / "out"):
        (tmp_path / "out").mkdir()
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_file_names_come_from_ids_whatever_the_capture_is_called(tmp_path: Path) -> None:
    audit = Audited()
    for one in audit.assessment.streams:
        one.stream.capture = "../../../tmp/evil\n.pcap"
    write_folder(audit, tmp_path / "out")
    names = {path.name for path in (tmp_path / "out" / "audio").iterdir()}
    assert {"c01.wav", "c01-s01-sent.wav", "c02-s04-heard.wav"} <= names
    assert all(re.fullmatch(r"c\d+(-s\d+-(sent|heard))?\.wav", name) for name in names)


def test_the_caution_names_consent_law_retention_and_loudness() -> None:
    for word in ("consent", "interception", "local rules", "Delete", "loud"):
        assert word in folder.CAUTION


def test_reports_of_the_same_audit_are_the_same(tmp_path: Path) -> None:
    write_folder(Audited(), tmp_path / "one")
    write_folder(Audited(), tmp_path / "two")
    one, two = everything(tmp_path / "one"), everything(tmp_path / "two")
    assert one == two
    assert np.all([len(octets) for octets in one.values()])


@pytest.mark.parametrize(("options", "steps"), [({}, 4), ({"private": True}, 2), ({"audio": False}, 2)])
def test_progress_goes_from_the_first_step_to_the_last(tmp_path: Path, options: dict[str, bool], steps: int) -> None:
    told: list[tuple[int, int]] = []
    write_folder(Audited(), tmp_path / "out", progress=lambda done, total: told.append((done, total)), **options)
    assert told == [(done, steps) for done in range(1, steps + 1)]
