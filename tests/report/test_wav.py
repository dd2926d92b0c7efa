"""WAV files: what the payloads say, to the sample, under names made of ids."""

import resource
import signal
from pathlib import Path

import numpy as np
import pytest
import soundfile

from rtpaudit.errors import UnusableOutput
from rtpaudit.report import wav
from rtpaudit.report.wav import write_audio, write_wav
from tests.report import made
from tests.report.made import Tones

RAMP = np.arange(-32768, 32768, 7, dtype=np.int16)


def test_every_sample_comes_back(tmp_path: Path) -> None:
    write_wav(tmp_path / "one.wav", RAMP, 16000)
    samples, rate = soundfile.read(tmp_path / "one.wav", dtype="int16")
    assert rate == 16000
    assert np.array_equal(samples, RAMP)
    assert soundfile.info(tmp_path / "one.wav").subtype == "PCM_16"


def test_a_long_file_is_written_in_blocks(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(wav, "FRAMES_AT_ONCE", 1000)
    write_wav(tmp_path / "one.wav", RAMP, 8000)
    assert np.array_equal(soundfile.read(tmp_path / "one.wav", dtype="int16")[0], RAMP)


def test_the_left_channel_is_the_first_column(tmp_path: Path) -> None:
    write_wav(tmp_path / "two.wav", np.column_stack([RAMP, RAMP[::-1]]), 8000)
    samples, _ = soundfile.read(tmp_path / "two.wav", dtype="int16")
    assert np.array_equal(samples[:, 0], RAMP)


def test_silence_of_no_length_is_a_file_too(tmp_path: Path) -> None:
    write_wav(tmp_path / "none.wav", np.empty(0, np.int16), 8000)
    assert soundfile.info(tmp_path / "none.wav").frames == 0


def test_a_file_that_breaks_off_leaves_nothing(tmp_path: Path) -> None:
    class Breaking(np.ndarray):
        def __getitem__(self, key: object) -> np.ndarray:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_wav(tmp_path / "one.wav", RAMP.view(Breaking), 8000)
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_is_not_there_is_one_sentence(tmp_path: Path) -> None:
    with pytest.raises(UnusableOutput, match="cannot be written"):
        write_wav(tmp_path / "missing" / "one.wav", RAMP, 8000)


def test_beyond_what_a_wav_header_can_count_the_file_is_rf64(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(wav, "LARGEST_WAV", 100)
    write_wav(tmp_path / "long.wav", RAMP, 8000)
    assert (tmp_path / "long.wav").read_bytes()[:4] == b"RF64"
    assert np.array_equal(soundfile.read(tmp_path / "long.wav", dtype="int16")[0], RAMP)


def test_each_call_has_its_streams_and_both_sides(tmp_path: Path) -> None:
    files, cautions = write_audio(tmp_path, made.assessment().calls, Tones())
    assert sorted(path.name for path in tmp_path.iterdir()) == [
        "c01-s01-heard.wav", "c01-s01-sent.wav", "c01-s02-heard.wav", "c01-s02-sent.wav", "c01.wav",
        "c02-s03-heard.wav", "c02-s03-sent.wav", "c02-s04-heard.wav", "c02-s04-sent.wav", "c02.wav",
    ]  # fmt: skip
    assert files == 10
    assert cautions == []
    assert soundfile.read(tmp_path / "c02-s04-sent.wav", dtype="int16")[0][0] == 4
    assert soundfile.read(tmp_path / "c02-s04-heard.wav", dtype="int16")[0][0] == -4


def test_an_encoding_without_a_decoder_is_left_out_and_said(tmp_path: Path) -> None:
    files, cautions = write_audio(tmp_path, made.assessment().calls, Tones(without_decoder=("s01", "s02", "s04")))
    assert files == 3
    assert cautions == ["no sound of s01, s02, s04: no decoder for opus"]
    assert not (tmp_path / "c01.wav").exists()


def test_many_silent_streams_are_one_caution(tmp_path: Path) -> None:
    streams = [made.stream(f"s{number:02d}", "c01") for number in range(1, 11)]
    silent = Tones(without_decoder=tuple(one.id for one in streams))
    files, cautions = write_audio(tmp_path, [made.call("c01", streams, [])], silent)
    assert files == 0
    assert cautions == ["no sound of s01, s02, s03, s04, s05, s06, s07, s08 and 2 more streams: no decoder for opus"]


def test_progress_counts_calls(tmp_path: Path) -> None:
    said: list[tuple[int, int]] = []
    write_audio(tmp_path, made.assessment().calls, Tones(), lambda done, total: said.append((done, total)))
    assert said == [(1, 2), (2, 2)]


def test_a_full_disk_is_one_sentence_and_leaves_nothing(tmp_path: Path) -> None:
    limits, handler = resource.getrlimit(resource.RLIMIT_FSIZE), signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    try:
        resource.setrlimit(resource.RLIMIT_FSIZE, (1000, limits[1]))
        with pytest.raises(UnusableOutput, match="is the disk full"):
            write_wav(tmp_path / "one.wav", RAMP, 8000)
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, limits)
        signal.signal(signal.SIGXFSZ, handler)
    assert list(tmp_path.iterdir()) == []
