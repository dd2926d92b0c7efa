import numpy as np
import pytest
import soundfile
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.audio.level import speech_level
from rtpaudit.listen.safety import (
    FAST_OVER_DB,
    FAST_S,
    GLIDE_S,
    MOST_GAIN_DB,
    SLOW_OVER_DB,
    SLOW_S,
    Limits,
    level_clip,
    limiting_gain,
)
from rtpaudit.profile import Listening
from tests.listen.captures import AUDIO, tone, voice
from tests.naive import listening as naive

DEFAULT = Listening()
LIMITS = Limits.of(DEFAULT)
SPEECH = voice(10.0)


def levels_db(samples: np.ndarray, rate_hz: int = 8000) -> tuple[float, float, float]:
    """Peak, and the loudest 125 ms and second, over the sum of all squares of each window. [dBov]"""
    padded = np.pad(samples.astype(np.float64) ** 2, rate_hz)
    total = np.concatenate([[0.0], np.cumsum(padded)])
    loudest = [
        10.0 * np.log10(max(np.max(total[window:] - total[:-window]) / window, 1.0) / 32768.0**2)
        for window in (round(FAST_S * rate_hz), round(SLOW_S * rate_hz))
    ]
    return 20.0 * np.log10(max(np.abs(samples.astype(np.int32)).max(), 1) / 32768.0), *loudest


def assert_safe(samples: np.ndarray, chosen: Listening = DEFAULT, rate_hz: int = 8000) -> None:
    peak, fast, slow = levels_db(samples, rate_hz)
    assert peak <= chosen.peak_dbov + 1e-6
    assert fast <= chosen.level_dbov + FAST_OVER_DB + 1e-6
    assert slow <= chosen.level_dbov + SLOW_OVER_DB + 1e-6


def within(speech: np.ndarray, sound: np.ndarray, at_s: float) -> np.ndarray:
    first = int(at_s * 8000)
    return np.concatenate([speech[:first], sound, speech[first + len(sound) :]])


@pytest.mark.parametrize("name", ["reader", "desk", "guest"])
@pytest.mark.parametrize("loudness", [0.15, 0.5, 1.0])
def test_speech_of_any_loudness_comes_to_one_active_level(name: str, loudness: float) -> None:
    samples = soundfile.read(AUDIO / f"{name}.wav", dtype="int16")[0][:80_000]
    clip = level_clip((samples * loudness).astype(np.int16), 8000, DEFAULT)
    assert clip is not None
    assert speech_level(clip.samples, 8000).active_dbov == pytest.approx(-26.0, abs=0.2)
    assert clip.gain_db == pytest.approx(-26.0 - clip.before_dbov, abs=0.2)
    assert_safe(clip.samples)


@pytest.mark.parametrize("name", ["reader", "desk", "guest"])
def test_speech_passes_the_limiter_untouched(name: str) -> None:
    samples = soundfile.read(AUDIO / f"{name}.wav", dtype="int16")[0][:80_000]
    clip = level_clip(samples, 8000, DEFAULT)
    assert clip is not None
    assert clip.limited_db < 0.01


STARTLING = {
    "a click": within(SPEECH, np.array([32767, -32768], np.int16), 5.0),
    "a tone burst of 20 ms": within(SPEECH, tone(0.02, 1100, 32000), 5.0),
    "a tone burst of 200 ms": within(SPEECH, tone(0.2, 1100, 32000), 5.0),
    "a tone burst over soft speech": within(SPEECH // 16, tone(0.4, 1100, 32000), 5.0),
    "a fax that answers": within(SPEECH, tone(3.0, 2100, 32000), 5.0),
    "nothing but a fax": tone(10.0, 2100, 32000),
    "howling that grows": (tone(10.0, 1800, 32000) * np.linspace(0.0, 1.0, 80_000)).astype(np.int16),
    "a square wave at full scale": (np.sign(tone(10.0, 300, 100)) * 32767).astype(np.int16),
    "loud noise": np.random.default_rng(1).normal(0.0, 20_000.0, 80_000).clip(-32768, 32767).astype(np.int16),
    "a tone that begins at once": tone(10.0, 1000, 32000)[::-1].copy(),
}


@pytest.mark.parametrize("what", STARTLING)
def test_nothing_startles(what: str) -> None:
    clip = level_clip(STARTLING[what], 8000, DEFAULT)
    assert clip is not None
    assert_safe(clip.samples)


def test_the_speech_around_a_burst_keeps_its_level() -> None:
    clip = level_clip(STARTLING["a tone burst of 200 ms"], 8000, DEFAULT)
    assert clip is not None
    assert clip.limited_db > 6.0
    assert speech_level(clip.samples[:36_000], 8000).active_dbov == pytest.approx(-26.0, abs=1.5)


def test_faint_noise_is_not_blown_up() -> None:
    faint = np.random.default_rng(1).normal(0.0, 10.0, 80_000).astype(np.int16)
    clip = level_clip(faint, 8000, DEFAULT)
    assert clip is not None
    assert clip.gain_db == MOST_GAIN_DB
    assert clip.after_dbov == pytest.approx(clip.before_dbov + MOST_GAIN_DB, abs=0.6)


def test_silence_makes_no_clip() -> None:
    assert level_clip(np.zeros(80_000, np.int16), 8000, DEFAULT) is None
    assert level_clip(np.zeros(0, np.int16), 8000, DEFAULT) is None


def test_a_clip_begins_and_ends_in_silence() -> None:
    clip = level_clip(tone(5.0, 500, 8000), 8000, DEFAULT)
    assert clip is not None
    edge, middle = np.abs(clip.samples[[0, 1, -2, -1]].astype(int)), np.abs(clip.samples).max()
    assert (edge < 0.01 * middle).all()


@pytest.mark.parametrize(
    "chosen", [Listening(level_dbov=-36.0), Listening(level_dbov=-20.0, peak_dbov=-3.0), Listening(peak_dbov=-20.0)]
)
def test_the_profile_sets_level_and_peak(chosen: Listening) -> None:
    clip = level_clip(STARTLING["a tone burst of 200 ms"], 8000, chosen)
    assert clip is not None
    assert_safe(clip.samples, chosen)
    if chosen.peak_dbov > -20.0:
        assert clip.after_dbov == pytest.approx(chosen.level_dbov, abs=0.5)


def test_wideband_sound_is_levelled_alike() -> None:
    from scipy.signal import resample_poly

    wide = np.rint(resample_poly(SPEECH.astype(float), 2, 1)).clip(-32768, 32767).astype(np.int16)
    clip = level_clip(wide, 16_000, DEFAULT)
    assert clip is not None
    assert clip.after_dbov == pytest.approx(-26.0, abs=0.2)
    assert_safe(clip.samples, rate_hz=16_000)


@settings(max_examples=40, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    loud=st.lists(st.tuples(st.integers(0, 3999), st.integers(1, 2000), st.integers(1, 32767)), max_size=6),
)
def test_the_limits_hold_for_any_sound(seed: int, loud: list[tuple[int, int, int]]) -> None:
    draw = np.random.default_rng(seed)
    sound = draw.normal(0.0, 500.0, 4000)
    for first, length, amplitude in loud:
        sound[first : first + length] = amplitude * draw.choice([-1.0, 1.0], len(sound[first : first + length]))
    clip = level_clip(sound.clip(-32768, 32767).astype(np.int16), 8000, DEFAULT)
    assert clip is None or assert_safe(clip.samples) is None


def test_the_limiter_takes_no_more_than_it_has_to_but_for_its_glide() -> None:
    """Against a gain worked out window by window."""
    draw = np.random.default_rng(3)
    rate, limits = 200, Limits(peak=9000.0, fast=4000.0, slow=2500.0)
    signal = draw.normal(0.0, 1500.0, 700)
    signal[300:330] = 12_000.0
    windows = [(round(FAST_S * rate), limits.fast), (round(SLOW_S * rate), limits.slow)]
    greatest = np.array(naive.limiting_gain(signal.tolist(), limits.peak, windows))
    gain = limiting_gain(signal, rate, limits)
    reach = 2 * round(GLIDE_S * rate)
    lowest_near = np.array([greatest[max(k - reach, 0) : k + reach + 1].min() for k in range(len(signal))])
    assert (gain <= greatest + 1e-9).all()
    assert (gain >= lowest_near - 1e-9).all()
    limited = signal * gain
    for window, limit in windows:
        assert naive.loudest_window(np.rint(limited).astype(int).tolist(), window) <= limit * 1.001
