"""Envelope and passages of speech."""

import base64

import numpy as np
import pytest

from rtpaudit.report.waveform import Waveforms, speech_passages, waveform

RATE = 8000


def talk(pattern: str, seed: int = 7) -> np.ndarray:
    """A second a sign: speech-like noise that swells and ebbs for ``x``, silence for ``-``."""
    noise = np.random.default_rng(seed).normal(0, 4000, RATE * len(pattern))
    swell = 0.55 + 0.45 * np.sin(2 * np.pi * 4 * np.arange(len(noise)) / RATE)
    on = np.repeat([sign == "x" for sign in pattern], RATE)
    return np.clip(noise * swell * on, -32768, 32767).astype(np.int16)


def test_no_extreme_is_lost_however_few_the_steps() -> None:
    samples = np.zeros(RATE, np.int16)
    samples[1234], samples[4321] = 32767, -32768
    shape = waveform(samples, RATE, 100)
    extremes = np.frombuffer(shape.envelope, np.int8).reshape(-1, 2)
    assert len(extremes) == 100
    assert (extremes[1234 // 80].tolist(), extremes[4321 // 80].tolist()) == ([0, 127], [-127, 0])
    assert np.count_nonzero(extremes) == 2


@pytest.mark.parametrize(("sample", "coded"), [(0, 0), (8192, 64), (-8192, -64), (2, 1), (32767, 127)])
def test_the_code_is_the_root_of_the_share_of_full_scale(sample, coded) -> None:
    assert np.frombuffer(waveform(np.full(4, sample, np.int16), RATE, 8).envelope, np.int8)[0] == coded


def test_steps_are_as_long_as_the_sound_asks_for() -> None:
    shape = waveform(np.zeros(RATE * 10 + 1, np.int16), RATE, 1000)
    assert (shape.step_s, shape.duration_s) == (81 / RATE, 10 + 1 / RATE)
    assert len(shape.envelope) <= 2000
    assert waveform(np.zeros(RATE, np.int16), RATE, 10**6).step_s == 0.002


def test_no_sound_has_no_steps() -> None:
    shape = waveform(np.empty(0, np.int16), RATE, 100)
    assert (shape.envelope, shape.passages) == (b"", [])


def test_passages_are_where_somebody_speaks() -> None:
    passages = speech_passages(talk("--xx---xxx--"), RATE)
    assert len(passages) == 2
    (begin, end), (later, last) = passages
    # The hangover of P.56 is 200 ms, and the envelope takes its time to fall.
    assert begin == pytest.approx(2.0, abs=0.05)
    assert later == pytest.approx(7.0, abs=0.05)
    assert 4.1 < end < 4.6
    assert 10.1 < last < 10.6


def test_nobody_speaks_in_silence() -> None:
    assert speech_passages(np.zeros(RATE * 3, np.int16), RATE) == []


def test_a_rate_that_carries_no_speech_has_no_passages() -> None:
    assert speech_passages(talk("xx"), 500) == []


def test_sound_that_was_seen_is_not_asked_for_again() -> None:
    asked: list[str] = []

    def heard(stream: str) -> tuple[np.ndarray, int]:
        asked.append(stream)
        return np.zeros(80, np.int16), RATE

    waveforms = Waveforms(heard, 10)
    waveforms.take("s01", np.full(80, 8192, np.int16), RATE)
    assert base64.b64decode(str(waveforms.of("s01").as_plain()["envelope"]))[0] == 64
    waveforms.of("s02")
    waveforms.of("s02")
    assert asked == ["s02"]
