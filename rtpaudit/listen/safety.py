"""Loudness of a clip: the same active speech level for all of them, and nothing in any that can startle.

Three limits hold at every moment, whatever the passage holds: a tone burst, a fax carrier, howling, a click.

- No sample goes over ``peak_dbov`` of the profile.
- The level over any 125 ms stays within ``FAST_OVER_DB`` of the level of the clips, that over any second within
  ``SLOW_OVER_DB``. 125 ms and 1 s are the time weightings F and S of sound level meters (IEC 61672-1, from memory). Of
  recorded speech the loudest 125 ms lie 6.7 to 8.6 dB over its active level, the loudest second 1.5 to 4.0 dB
  (measured on three voices), so speech passes untouched, and nothing else gets louder than loud syllables.
- Gain is at most ``MOST_GAIN_DB``: where nobody speaks, noise is not blown up to the level of speech.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import FULL_SCALE, speech_level
from rtpaudit.profile import Listening

Samples = NDArray[np.int16]
Signal = NDArray[np.float64]

FAST_S, SLOW_S = 0.125, 1.0
FAST_OVER_DB, SLOW_OVER_DB = 9.0, 5.0
MOST_GAIN_DB = 20.0
GLIDE_S = 0.02
"""in which the limiter closes and opens, before and after what it limits"""
FADE_S = 0.05
CLOSE_DB, ROUNDS = 0.1, 6
"""the gain is mended until the clip is so close to its level, as the limiter may have lowered it"""


@dataclass(frozen=True, slots=True)
class Levelled:
    """A clip at its level."""

    samples: Samples
    before_dbov: float
    """active speech level of the passage"""
    after_dbov: float
    """the same of the clip"""
    gain_db: float
    limited_db: float
    """by how much the limiter lowered it where it lowered it most, 0 where it had nothing to do"""


@dataclass(frozen=True, slots=True)
class Limits:
    """What holds at every moment, in samples."""

    peak: float
    fast: float
    """root mean square over 125 ms"""
    slow: float
    """root mean square over 1 s"""

    @classmethod
    def of(cls, settings: Listening) -> "Limits":
        """The limits that go with a level."""
        levels = settings.peak_dbov, settings.level_dbov + FAST_OVER_DB, settings.level_dbov + SLOW_OVER_DB
        return cls(*(FULL_SCALE * 10.0 ** (level / 20.0) for level in levels))


def level_clip(passage: Samples, sampling_rate_hz: int, settings: Listening) -> Levelled | None:
    """A passage brought to the level of the profile, limited and faded; None where it holds no sound at all.

    The level is that of speech by ITU-T P.56, method B, after the limiter.
    """
    before = speech_level(passage, sampling_rate_hz).active_dbov
    if math.isnan(before):
        return None
    limits = Limits.of(settings)
    gain_db = min(settings.level_dbov - before, MOST_GAIN_DB)
    for _ in range(ROUNDS):
        clip, limited_db = _at_gain(passage, sampling_rate_hz, gain_db, limits)
        after = speech_level(clip, sampling_rate_hz).active_dbov
        missing = settings.level_dbov - after
        if math.isnan(after) or abs(missing) <= CLOSE_DB or (missing > 0.0 and gain_db == MOST_GAIN_DB):
            break
        gain_db = min(gain_db + missing, MOST_GAIN_DB)
    return Levelled(clip, before, after, gain_db, limited_db)


def _at_gain(passage: Samples, sampling_rate_hz: int, gain_db: float, limits: Limits) -> tuple[Samples, float]:
    signal = passage.astype(np.float64) * 10.0 ** (gain_db / 20.0)
    gain = limiting_gain(signal, sampling_rate_hz, limits)
    limited_db = abs(20.0 * math.log10(float(gain.min(initial=1.0))))
    # Cutting off what is behind the point only makes a sample smaller.
    return np.trunc(signal * gain * _fades(len(signal), sampling_rate_hz)).astype(np.int16), limited_db


def limiting_gain(signal: Signal, sampling_rate_hz: int, limits: Limits) -> Signal:
    """Gain of each sample, at most 1, under which a signal keeps all limits. Shape (n,).

    It looks ahead, as it may: it begins to close before what is too loud begins.
    """
    from scipy.ndimage import minimum_filter1d, uniform_filter1d

    needed = np.minimum(1.0, limits.peak / np.maximum(np.abs(signal), 1.0))
    for seconds, limit in ((FAST_S, limits.fast), (SLOW_S, limits.slow)):
        needed = np.minimum(needed, _window_gain(signal, round(seconds * sampling_rate_hz), limit))
    # The mean over the reach of the minimum never exceeds what any sample needs.
    reach = 2 * round(GLIDE_S * sampling_rate_hz) + 1
    return np.asarray(uniform_filter1d(minimum_filter1d(needed, reach, mode="nearest"), reach, mode="nearest"))


def _window_gain(signal: Signal, window: int, limit: float) -> Signal:
    """Gain of each sample under which no window that holds it is louder than the limit."""
    from scipy.ndimage import minimum_filter1d

    total = np.concatenate([np.zeros(window), np.cumsum(signal * signal)])
    total = np.concatenate([total, np.full(window - 1, total[-1])])
    level = np.sqrt(np.maximum(total[window:] - total[:-window], 0.0) / window)
    gain = np.minimum(1.0, limit / np.maximum(level, 1e-9))
    # Window k ends at sample k; sample i is in windows i to i + window - 1.
    return np.asarray(minimum_filter1d(gain, window, mode="nearest", origin=-(window // 2))[: len(signal)])


def _fades(count: int, sampling_rate_hz: int) -> Signal:
    """Raised cosines at both ends."""
    gain = np.ones(count)
    length = min(round(FADE_S * sampling_rate_hz), count // 2)
    rise = 0.5 - 0.5 * np.cos(np.pi * (np.arange(length) + 0.5) / max(length, 1))
    gain[:length] = rise
    gain[count - length :] = rise[::-1]
    return gain
