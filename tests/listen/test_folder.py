import json
from pathlib import Path

import pytest
import soundfile

import rtpaudit
from rtpaudit.errors import UnusableArguments, UnusableOutput
from rtpaudit.listen.folder import refuse_listening_folder, write_listening_folder
from rtpaudit.listen.key import read_key
from rtpaudit.report.folder import write_folder
from rtpaudit.walk import Audit
from tests.listen.captures import capture, voice
from tests.report import made


@pytest.fixture(scope="module")
def audit(tmp_path_factory: pytest.TempPathFactory) -> Audit:
    path = tmp_path_factory.mktemp("call") / "Mrs Complaint.pcap"
    path.write_bytes(capture(voice(40.0), voice(40.0, "guest"), lost=[(20.0, 20.3)]))
    return rtpaudit.audit(path)


@pytest.fixture
def folder(tmp_path: Path, audit: Audit) -> Path:
    write_listening_folder(audit, tmp_path / "check", 6, 1)
    return tmp_path / "check"


def files(folder: Path) -> set[str]:
    return {str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file()}


def test_the_listeners_part_holds_the_sheet_and_its_clips(folder: Path) -> None:
    key = read_key(folder / "key.csv")
    clips = {f"listeners/clips/{clip}.wav" for clip in key}
    assert files(folder) == clips | {"listeners/rating-sheet.html", "key.csv", "listening.json"}


def test_nothing_in_the_listeners_part_tells_what_a_clip_is(folder: Path) -> None:
    secrets = [b"Complaint", b"192.0.2", b"198.51", b"s01", b"c01", b"PCMU", b"anchor", b"worst"]
    for path in (folder / "listeners").rglob("*"):
        if path.is_file():
            octets = path.read_bytes()
            # A picture of the whole stylesheet is no secret.
            octets = octets.split(b"</style>")[-1] if path.suffix == ".html" else octets[:44]
            assert not any(secret in octets for secret in secrets), path.name


def test_the_key_and_the_files_agree(folder: Path) -> None:
    for clip, row in read_key(folder / "key.csv").items():
        sound = soundfile.info(folder / "listeners" / "clips" / f"{clip}.wav")
        assert (sound.samplerate, sound.channels, sound.subtype) == (row.sampling_rate_hz, 1, "PCM_16")
        assert sound.duration == pytest.approx(row.duration_s, abs=0.001)
        assert row.capture == "Mrs Complaint.pcap"
    lost = [row for row in read_key(folder / "key.csv").values() if row.packets_lost]
    assert [(row.kind, row.packets_lost, row.speaker) for row in lost] == [("worst", 15, "caller")]


def test_it_says_by_what_it_was_made(folder: Path) -> None:
    about = json.loads((folder / "listening.json").read_bytes())
    assert about["check"] == next(iter(read_key(folder / "key.csv").values())).check
    assert about["limits"] == {
        "peak_dbov": -6.0,
        "level_125_ms_dbov": -17.0,
        "level_1_s_dbov": -21.0,
        "gain_db": 20.0,
    }
    assert "consent" in about["cautions"][0]


def test_the_same_seed_writes_the_same(audit: Audit, folder: Path, tmp_path: Path) -> None:
    for seed, same in ((1, True), (2, False)):
        write_listening_folder(audit, tmp_path / "again", 6, seed)
        assert ((tmp_path / "again" / "key.csv").read_bytes() == (folder / "key.csv").read_bytes()) == same


def test_a_folder_of_ours_is_replaced_as_a_whole(audit: Audit, folder: Path) -> None:
    write_listening_folder(audit, folder, 2, 1)
    assert sum(name.endswith(".wav") for name in files(folder)) == 2


@pytest.mark.parametrize("place", ["votes-Ann.csv", "listeners/votes-Ann.csv"])
def test_ratings_are_never_lost_to_a_new_check(audit: Audit, folder: Path, place: str) -> None:
    (folder / place).write_text("a listener's work")
    before = files(folder)
    with pytest.raises(UnusableOutput, match=r"holds votes-Ann\.csv, which would be lost"):
        write_listening_folder(audit, folder, 6, 1)
    assert files(folder) == before


def test_what_is_not_ours_or_something_else_is_refused(tmp_path: Path) -> None:
    (tmp_path / "diary").mkdir()
    write_folder(made.Audited(), tmp_path / "report", audio=False)
    for name in ("diary", "report"):
        with pytest.raises(UnusableOutput, match=name):
            refuse_listening_folder(tmp_path / name)
    refuse_listening_folder(tmp_path / "not there yet")


def test_a_capture_without_speech_says_why(tmp_path: Path) -> None:
    path = tmp_path / "short.pcap"
    path.write_bytes(capture(voice(2.0), voice(2.0, "guest")))
    with pytest.raises(UnusableArguments, match=r"short\.pcap: no passage of speech is long enough for a clip"):
        write_listening_folder(rtpaudit.audit(path), tmp_path / "check", 6, 1)
    assert not (tmp_path / "check").exists()
