"""Call-progress and fax tones, named by frequency and cadence.

Frequencies and cadences are those of ITU-T E.180 and its Supplement 2, of North American practice, and of ITU-T T.30,
all from memory: no tone named here is beyond doubt, and countries differ.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from rtpaudit.audio.tones import ToneBurst

NEAR_HZ = 8.0
NEAR_SHARE = 0.015
LONGEST_PAUSE_S = 6.5
"""between two rings; after a longer one a new series begins"""
SINGLE_HZ = (400.0, 425.0, 440.0, 450.0)
"""administrations that use one frequency for all of their tones"""
PAIRS_HZ = {(350.0, 440.0): "dial", (440.0, 480.0): "ringing", (400.0, 450.0): "ringing", (480.0, 620.0): "busy"}
INFORMATION_HZ = ((900.0, 1000.0), (1350.0, 1450.0), (1750.0, 1850.0))
"""the three frequencies of the special information tone, each about a third of a second"""
FAX = (
    # T.30: 1100 Hz +- 38 Hz, 0.5 s on and 3 s off, +- 15 %; 2100 Hz +- 15 Hz, 2.6 to 4.0 s. V.8 sends it longer.
    ("fax calling (CNG)", 1100.0, 38.0, (0.42, 0.58)),
    ("fax or modem answering (CED)", 2100.0, 15.0, (1.5, 12.0)),
)


@dataclass(frozen=True, slots=True)
class ProgressTone:
    """A named tone: one burst or a series of them."""

    name: str
    """dial, ringing, busy, congestion, special information, fax calling (CNG), fax or modem answering (CED)"""
    frequencies_hz: tuple[float, ...]
    on_s: float
    """median length of its bursts"""
    off_s: float
    """median pause between them; NaN for a single burst"""
    bursts: int
    from_s: float
    to_s: float
    level_dbov: float
    confidence_pct: float


def progress_tones(bursts: Sequence[ToneBurst]) -> list[ProgressTone]:
    """Bursts put together into series and named; bursts that fit no name are left out.

    Parameters
    ----------
    bursts : sequence of ToneBurst
        In order of time, as from ``tones.tone_bursts``.

    Returns
    -------
    list of ProgressTone
        In order of time.

    References
    ----------
    ITU-T E.180 (tones used in national signalling), ITU-T T.30, from memory.
    """
    named = [*_information(bursts)]
    for series in _series(bursts):
        name, confidence = _name(series)
        if name:
            named.append(_put_together(name, series, confidence))
    return sorted(named, key=lambda one: one.from_s)


def _series(bursts: Sequence[ToneBurst]) -> list[list[ToneBurst]]:
    """Bursts of the same frequencies that follow one another in the same rhythm."""
    series: list[list[ToneBurst]] = []
    for burst in bursts:
        last = series[-1][-1] if series else None
        if last and _agree(last.frequencies_hz, burst.frequencies_hz) and burst.from_s - last.to_s <= LONGEST_PAUSE_S:
            series[-1].append(burst)
        else:
            series.append([burst])
    return series


def _name(series: list[ToneBurst]) -> tuple[str, float]:
    """Name of a series and the confidence in it [%]; no name where nothing fits."""
    heard = series[0].frequencies_hz
    on, off = _cadence(series)
    for name, hz, near, (shortest, longest) in FAX:
        if len(heard) == 1 and abs(heard[0] - hz) <= near and shortest <= on <= longest:
            rhythm = np.isnan(off) or hz > 2000 or 2.5 <= off <= 3.5
            return (name, 95.0 if len(series) > 1 else 80.0) if rhythm else ("", 0.0)
    for pair, name in PAIRS_HZ.items():
        if _agree(pair, heard):
            return _by_pair(name, on, off)
    if len(heard) == 1 and any(_agree((one,), heard) for one in SINGLE_HZ):
        return _by_cadence(on, off)
    return "", 0.0


def _by_pair(name: str, on: float, off: float) -> tuple[str, float]:
    """Two frequencies say it nearly all; the rhythm tells busy from congestion."""
    if name == "busy" and on < 0.35:
        return "congestion", 90.0
    if name == "dial" and on < 0.3:
        return name, 60.0
    return name, 95.0 if not np.isnan(off) or name == "dial" else 80.0


def _by_cadence(on: float, off: float) -> tuple[str, float]:
    """One frequency for all tones: continuous, once every few seconds, or about once or twice a second (E.180)."""
    if np.isnan(off):
        if on >= 2.5:
            return "dial", 75.0
        return ("ringing", 50.0) if 0.6 <= on <= 2.2 else ("", 0.0)
    if 2.0 <= off <= LONGEST_PAUSE_S and 0.3 <= on <= 2.2:
        return "ringing", 90.0
    if 0.3 < on + off <= 0.64:
        return "congestion", 85.0
    if 0.64 < on + off <= 1.4 and 0.5 <= on / off <= 2.0:
        return "busy", 85.0
    return "", 0.0


def _information(bursts: Sequence[ToneBurst]) -> list[ProgressTone]:
    """Special information tones: three rising frequencies at once after one another."""
    found = []
    for three in zip(bursts, bursts[1:], bursts[2:], strict=False):
        rising = all(
            len(one.frequencies_hz) == 1 and low <= one.frequencies_hz[0] <= high and one.duration_s <= 0.6
            for one, (low, high) in zip(three, INFORMATION_HZ, strict=True)
        )
        close = all(after.from_s - before.to_s < 0.1 for before, after in pairwise(three))
        if rising and close:
            together = _put_together("special information", list(three), 95.0)
            found.append(together)
    return found


def _put_together(name: str, series: list[ToneBurst], confidence: float) -> ProgressTone:
    on, off = _cadence(series)
    heard = tuple(sorted({hz for one in series for hz in one.frequencies_hz}))
    if name != "special information":
        columns = zip(*(one.frequencies_hz for one in series), strict=True)
        heard = tuple(float(np.median(column)) for column in columns)
    level = float(np.median([one.level_dbov for one in series]))
    return ProgressTone(name, heard, on, off, len(series), series[0].from_s, series[-1].to_s, level, confidence)


def _cadence(series: list[ToneBurst]) -> tuple[float, float]:
    """Median length of the bursts and of the pauses between them. [s]  The first and last may have been cut."""
    inner = series[1:-1] if len(series) > 2 else series
    pauses = [after.from_s - before.to_s for before, after in pairwise(series)]
    return float(np.median([one.duration_s for one in inner])), float(np.median(pauses)) if pauses else float("nan")


def _agree(one: tuple[float, ...], other: tuple[float, ...]) -> bool:
    return len(one) == len(other) and all(
        abs(a - b) <= max(NEAR_HZ, NEAR_SHARE * a) for a, b in zip(one, other, strict=True)
    )
