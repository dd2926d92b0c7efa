"""Speech level and activity by ITU-T P.56 method B, noise in the pauses, and both in windows.

The algorithm is known through the ITU-T G.191 software library; the text of P.56 was not at hand.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.scan import BLOCKS_PER_S, BLOCKS_PER_WINDOW, THRESHOLDS, Mask, Samples, Scan, scan
from rtpaudit.units import PCMA_DBM0_AT_0_DBOV, PCMU_DBM0_AT_0_DBOV

MARGIN_DB = 15.9
"""between active speech level and threshold. ITU-T P.56, method B (through G.191)"""
TOLERANCE_DB = 0.5
"""within which the margin is met. ITU-T P.56, method B (through G.191)"""
PAUSES_S = 0.25
"""of pauses at least before they tell the noise (common practice)"""
PAUSES_SHARE = 0.02
LEAST_TENTHS = 20
STEADY_DB = 3.0
"""a stream whose soft tenths of a second are this close to its level does not speak (common practice)"""
NOISE_CREST = 4.7
"""square of peak over root mean square in 10 ms: 2 for one tone, 4 for two, 6 for noise (common practice)"""
FULL_SCALE = 32768.0
SILENCE_DBOV = -127.0
"""level of digital silence: the lowest that the noise level octet of RFC 3389, 3.1 can say"""
DBM0_AT_0_DBOV = {"PCMU": PCMU_DBM0_AT_0_DBOV, "PCMA": PCMA_DBM0_AT_0_DBOV, "G722": 12.01}
"""level in dBm0 of a 0 dBov signal. ITU-T G.191 manual, chapter 2; no other encoding has an agreed value"""

THRESHOLDS_DB = 20.0 * np.log10(2.0) * (np.arange(THRESHOLDS) - THRESHOLDS)


@dataclass(frozen=True, slots=True)
class SpeechLevel:
    """Outcome of P.56 method B."""

    active_dbov: float
    """active speech level; NaN where there is no activity"""
    activity_pct: float
    """share of the time that is active; NaN where nothing was received"""
    long_term_dbov: float
    threshold_dbov: float
    """level of the envelope that separates speech from pauses; NaN where there is no activity"""


@dataclass(frozen=True, slots=True)
class WindowLevels:
    """Level and activity in windows of 2 s. Shape (windows,)."""

    activity_pct: NDArray[np.float64]
    """against the threshold of the whole stream; NaN where nothing was counted"""
    level_dbov: NDArray[np.float64]
    """root mean square of what was received; NaN where nothing was"""


def dbov(mean_square: NDArray[np.float64] | float) -> NDArray[np.float64]:
    """Level of a mean square, at least ``SILENCE_DBOV``. [dBov]  Any shape; NaN stays NaN."""
    least = FULL_SCALE**2 * 10.0 ** (SILENCE_DBOV / 10.0)
    return np.asarray(10.0 * np.log10(np.maximum(mean_square, least) / FULL_SCALE**2))


def dbm0(level_dbov: float, encoding: str) -> float:
    """The same level in dBm0 as the law's overload point has it; NaN for an encoding without one."""
    return level_dbov + DBM0_AT_0_DBOV.get(encoding.upper(), float("nan"))


def speech_level(samples: Samples, sampling_rate_hz: int, received: Mask | None = None) -> SpeechLevel:
    """Active speech level, activity and long-term level of one stream; arguments as for ``scan``."""
    return level_of(scan(samples, sampling_rate_hz, received))


def level_of(scanned: Scan) -> SpeechLevel:
    """Active speech level, activity and long-term level.

    Parameters
    ----------
    scanned : Scan

    Returns
    -------
    SpeechLevel

    Notes
    -----
    The long-term level is that of the received samples, so that lost packets do not lower it. Method B finds an active
    level in any sound, steady noise included.

    References
    ----------
    ITU-T P.56, method B, as in ITU-T G.191 (speech voltmeter): two-stage exponential averaging of the magnitude with
    30 ms, hangover 200 ms, the threshold 15.9 dB below the active level found by halving between two powers of two.
    """
    nothing = float("nan")
    energy, counted = float(scanned.energy.sum()), int(scanned.active.sum())
    if counted == 0:
        return SpeechLevel(nothing, nothing, nothing, nothing)
    long_term = float(dbov(energy / max(1, int(scanned.received.sum()))))
    above = scanned.active.sum(axis=0)[::-1].cumsum()[::-1][1:]
    levels = [float(dbov(energy / count)) for count in above if count]
    margins = [level - threshold for level, threshold in zip(levels, THRESHOLDS_DB, strict=False)]
    if not levels or margins[0] < MARGIN_DB:
        return SpeechLevel(nothing, 0.0, long_term, nothing)
    for upper in range(1, len(levels)):
        if margins[upper] <= MARGIN_DB:
            active, threshold = _halve(
                (levels[upper - 1], THRESHOLDS_DB[upper - 1]), (levels[upper], THRESHOLDS_DB[upper])
            )
            activity = 100.0 * energy / counted / (FULL_SCALE**2 * 10.0 ** (active / 10.0))
            return SpeechLevel(active, min(100.0, activity), long_term, threshold)
    return SpeechLevel(nothing, 0.0, long_term, nothing)


def noise_level_dbov(scanned: Scan, level: SpeechLevel) -> float:
    """Level in the pauses of the speech.

    Parameters
    ----------
    scanned : Scan
    level : SpeechLevel
        Of the same stream; without activity the whole stream is a pause.

    Returns
    -------
    float
        Median over the 10 ms blocks in which the envelope stayed below the P.56 threshold, hangover included, the
        offset taken out; ``SILENCE_DBOV`` for digital silence, NaN where there is no telling. [dBov]

    Notes
    -----
    Noise less than about 16 dB below the speech keeps P.56 from seeing pauses. Where they make less than ``PAUSES_S``
    and ``PAUSES_SHARE``, noise is the level that a twentieth of the tenths of a second stay below (common practice).
    Where that is hardly below the level of the whole, the sound is steady: noise if its crest is that of noise, else
    a tone, and then there is no telling.
    """
    power, there = scanned.power(), scanned.received > 0
    pauses = power[there & (scanned.reached <= _thresholds_below(level.threshold_dbov))]
    if len(pauses) >= max(PAUSES_S * BLOCKS_PER_S, PAUSES_SHARE * int(there.sum())):
        return float(dbov(float(np.median(pauses))))
    tenths = power[there][: int(there.sum()) // 10 * 10].reshape(-1, 10).mean(axis=1)
    if len(tenths) < LEAST_TENTHS:
        return float("nan")
    floor = float(dbov(float(np.percentile(tenths, 5))))
    if floor < level.long_term_dbov - STEADY_DB:
        return floor
    with np.errstate(invalid="ignore", divide="ignore"):
        crest = float(np.median(scanned.peak[there] ** 2.0 / power[there]))
    return level.long_term_dbov if crest > NOISE_CREST else float("nan")


def window_levels(scanned: Scan, level: SpeechLevel) -> WindowLevels:
    """Activity and level of each window.

    Parameters
    ----------
    scanned : Scan
    level : SpeechLevel
        Of the same stream: its threshold is that of all windows, so that they add up to it.

    Returns
    -------
    WindowLevels
    """
    starts = np.arange(0, len(scanned.energy), BLOCKS_PER_WINDOW)
    if not len(starts):
        return WindowLevels(np.empty(0), np.empty(0))
    energy = np.add.reduceat(scanned.energy, starts)
    received = np.add.reduceat(scanned.received, starts)
    counted = scanned.active.sum(axis=1)
    above = scanned.active[:, ::-1].cumsum(axis=1)[:, ::-1][:, 1:].astype(np.float64)
    with np.errstate(invalid="ignore", divide="ignore"):
        share = 100.0 * _at_threshold(above, level.threshold_dbov) / counted
        return WindowLevels(np.where(counted > 0, share, np.nan), dbov(energy / received))


def level_difference_db(one: SpeechLevel, other: SpeechLevel) -> float:
    """By how much ``one`` is louder than ``other`` while they speak; NaN where one of them does not. [dB]"""
    return one.active_dbov - other.active_dbov


def _halve(below: tuple[float, float], above: tuple[float, float]) -> tuple[float, float]:
    """Active level and threshold at which they are the margin apart, by halving between two (level, threshold)."""
    for ends in (above, below):
        if abs(ends[0] - ends[1] - MARGIN_DB) < TOLERANCE_DB:
            return ends
    while True:
        middle = ((below[0] + above[0]) / 2.0, (below[1] + above[1]) / 2.0)
        excess = middle[0] - middle[1] - MARGIN_DB
        if abs(excess) <= TOLERANCE_DB:
            return middle
        below, above = (middle, above) if excess > 0 else (below, middle)


def _thresholds_below(threshold_dbov: float) -> int:
    """How many of the thresholds lie below the one that was found; all of them where none was."""
    if np.isnan(threshold_dbov):
        return THRESHOLDS
    return int(np.searchsorted(THRESHOLDS_DB, threshold_dbov + 1e-9)) - 1


def _at_threshold(above: NDArray[np.float64], threshold_dbov: float) -> NDArray[np.float64]:
    """Samples active at a threshold between two of the 15, which grow or fall by a constant ratio between them."""
    if np.isnan(threshold_dbov):
        return np.zeros(len(above))
    place = (threshold_dbov - THRESHOLDS_DB[0]) / (THRESHOLDS_DB[1] - THRESHOLDS_DB[0])
    lower = min(int(place), THRESHOLDS - 2)
    part = place - lower
    return np.asarray(above[:, lower] ** (1.0 - part) * above[:, lower + 1] ** part)
