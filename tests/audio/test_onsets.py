"""Beginnings of talkspurts, made of tones in the test."""

import numpy as np
import pytest

from rtpaudit.audio.level import SpeechLevel
from rtpaudit.audio.onsets import onsets_of

LEVEL = SpeechLevel(active_dbov=-26.0, activity_pct=50.0, long_term_dbov=-29.0, threshold_dbov=-42.0)


def spurts(rises_s: list[float], rate: int = 8000) -> tuple[np.ndarray, np.ndarray]:
    """A second each: a tone at -26 dBov that rises within some time, from 50 dB below."""
    parts = []
    for rise in rises_s:
        t = np.arange(rate) / rate
        tone = 32768 * 10 ** (-26 / 20) * np.sqrt(2) * np.sin(2 * np.pi * 313 * t)
        gain = np.where(t < rise, 10 ** (-50 / 20), 1.0)
        parts.append(np.where(t < 0.5, tone * gain, 0.0))
    return np.concatenate(parts).astype(np.int16), np.arange(len(rises_s)) * rate


def test_talkspurts_that_rise_are_whole() -> None:
    found = onsets_of(*_at(spurts([0.02] * 6)), LEVEL)
    assert found is not None
    assert (found.talkspurts, found.cut, found.cut_pct) == (6, 0, 0.0)


def test_talkspurts_in_full_swing_are_cut() -> None:
    found = onsets_of(*_at(spurts([0.0, 0.0, 0.02, 0.0, 0.0])), LEVEL)
    assert found is not None
    assert (found.talkspurts, found.cut, found.cut_pct) == (5, 4, pytest.approx(80.0))


def test_noise_in_place_of_speech_is_no_talkspurt() -> None:
    samples, begins = spurts([0.0] * 5)
    samples[8000:16000] //= 200
    found = onsets_of(samples, 8000, begins, LEVEL)
    assert found is not None
    assert found.talkspurts == 4


def test_three_talkspurts_are_too_few() -> None:
    assert onsets_of(*_at(spurts([0.0] * 3)), LEVEL) is None


def _at(made):
    samples, begins = made
    return samples, 8000, begins
