"""Spectrum of a stream by the second: mains hum, and energy outside the telephone band."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import FULL_SCALE, dbov
from rtpaudit.audio.scan import BLOCKS_PER_S, Samples, Scan

Spectra = NDArray[np.float32]

SECONDS = 120
"""of sound that are looked at, spread over the stream"""
BAND_HZ = (300, 3400)
"""of telephone speech. ITU-T G.712, from memory"""
AUDIBLE_HZ = 5
"""below it lies the offset, spread by the window"""
LEAST_DBOV = -85.0
"""a second below it is silence and tells nothing"""
MAINS_HZ = (50, 60)
HARMONICS = 8
PROMINENCE_DB = 10.0
"""of a line of hum above the spectrum beside it (common practice)"""
ALONE_DB = 25.0
"""prominence from which the mains frequency counts without any of its multiples (common practice)"""
FIRST_TWO = 10.0**2.5
"""by which the power of another multiple may exceed that of the first two; a tone exceeds it (common practice)"""
STEADY_SHARE = 20
"""hum lasts: it is looked for in the fifth of the seconds that is quietest at its frequency [%]"""
LEAST_SECONDS = 4
LEAST_HUM_DBOV = -65.0
"""below it nobody hears a hum (common practice)"""
TONE_RANGE_DB = 45.0
"""further below a steady tone its own quantising noise has lines, wherever they fall"""


@dataclass(frozen=True, slots=True)
class Hum:
    """Mains hum: lines at the multiples of the mains frequency that stay through speech and pauses."""

    mains_hz: int
    level_dbov: float
    """of all its lines together"""
    harmonics: tuple[int, ...]
    """which multiples stand out"""
    strongest_hz: int
    confidence_pct: float


@dataclass(frozen=True, slots=True)
class Band:
    """Energy beside the telephone band; NaN where there was no sound."""

    below_pct: float
    """below 300 Hz"""
    above_pct: float
    """above 3400 Hz"""


def spectra_of(samples: Samples, scanned: Scan) -> Spectra:
    """Power spectra of seconds spread over the stream.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    scanned : Scan
        Of these samples: seconds that were not received whole, or are silent, are passed over.

    Returns
    -------
    float32 array, shape (seconds, bins)
        Hann window, bins of 1 Hz; a row adds up to the mean square of its second in units of full scale. Seconds
        overlap by half where there are fewer than ``SECONDS``.
    """
    rate = scanned.sampling_rate_hz
    count = min(len(scanned.energy) // BLOCKS_PER_S, len(samples) // rate)
    steps = np.arange(0, max(0, 2 * count - 1)) * (BLOCKS_PER_S // 2)
    length = BLOCKS_PER_S * scanned.block_samples
    energy = np.concatenate([[0.0], np.cumsum(np.nan_to_num(scanned.power()) * scanned.received)])
    received = np.concatenate([[0], np.cumsum(scanned.received, dtype=np.int64)])
    whole = received[steps + BLOCKS_PER_S] - received[steps] == length
    loud = dbov((energy[steps + BLOCKS_PER_S] - energy[steps]) / length) > LEAST_DBOV
    chosen = steps[whole & loud]
    if len(chosen) > SECONDS:
        chosen = chosen[np.linspace(0, len(chosen) - 1, SECONDS).astype(np.int64)]
    window = np.hanning(length + 1)[:-1].astype(np.float32)
    window *= np.float32(np.sqrt(2.0 / (window @ window) / length) / FULL_SCALE)
    spectra = np.empty((len(chosen), length // 2 + 1), np.float32)
    for row, block in zip(spectra, chosen, strict=True):
        first = block * scanned.block_samples
        second = samples[first : first + length].astype(np.float32)
        line = np.fft.rfft((second - second.mean()) * window)
        row[:] = line.real**2 + line.imag**2
    return spectra


def hum_of(spectra: Spectra) -> Hum | None:
    """Mains hum, None where there is none.

    Parameters
    ----------
    spectra : float32 array, shape (seconds, bins)
        As from ``spectra_of``.

    Returns
    -------
    Hum or None
        Where two or more of the first eight multiples of 50 or 60 Hz stand out by 10 dB, one of the first two among
        them and not faint beside the others, or the mains frequency itself by 25 dB, and the hum is above
        ``LEAST_HUM_DBOV``.

    Notes
    -----
    Common practice. The quiet seconds are taken bin by bin, so that speech, which moves, drops out.
    """
    if len(spectra) < LEAST_SECONDS:
        return None
    steady = np.percentile(spectra, STEADY_SHARE, axis=0).astype(np.float64)
    least = max(LEAST_HUM_DBOV, float(dbov(float(steady.sum()) * FULL_SCALE**2)) - TONE_RANGE_DB)
    found = [_hum_at(steady, mains, len(spectra)) for mains in MAINS_HZ]
    audible = [one for one in found if one is not None and one.level_dbov >= least]
    return max(audible, key=lambda one: one.level_dbov, default=None)


def band_of(spectra: Spectra) -> Band:
    """Shares of the energy below and above the telephone band; shape and bins as from ``spectra_of``. [%]"""
    power = spectra.sum(axis=0, dtype=np.float64)
    whole = float(power[AUDIBLE_HZ:].sum())
    if whole <= 0.0:
        return Band(float("nan"), float("nan"))
    low, high = BAND_HZ
    return Band(100.0 * float(power[AUDIBLE_HZ:low].sum()) / whole, 100.0 * float(power[high + 1 :].sum()) / whole)


def _hum_at(steady: NDArray[np.float64], mains_hz: int, seconds: int) -> Hum | None:
    """Hum at one mains frequency."""
    lines = {}
    for harmonic in range(1, HARMONICS + 1):
        nominal = harmonic * mains_hz
        slack = 1 + harmonic // 3
        if nominal + 15 >= len(steady):
            break
        peak = nominal - slack + int(np.argmax(steady[nominal - slack : nominal + slack + 1]))
        beside = np.concatenate([steady[peak - 12 : peak - 3], steady[peak + 4 : peak + 13]])
        floor = float(np.median(beside))
        prominence = 10.0 * np.log10((steady[peak] + 1e-20) / (floor + 1e-20))
        if prominence >= PROMINENCE_DB:
            lines[harmonic] = (float(steady[peak - 1 : peak + 2].sum()) - 3.0 * floor, float(prominence), peak)
    strongest = max(lines.values(), default=(0.0, 0.0, 0))
    alone = len(lines) == 1 and lines.get(1, (0.0, 0.0))[1] >= ALONE_DB
    if (len(lines) < 2 and not alone) or strongest[0] > FIRST_TWO * max(lines.get(k, (0.0,))[0] for k in (1, 2)):
        return None
    excess = float(np.mean([line[1] for line in lines.values()])) - PROMINENCE_DB
    confidence = min(99.0, 50.0 + 2.0 * excess + 5.0 * len(lines)) * min(1.0, 0.6 + seconds / 40.0)
    level = float(dbov(sum(line[0] for line in lines.values()) * FULL_SCALE**2))
    return Hum(mains_hz, level, tuple(sorted(lines)), strongest[2], confidence)
