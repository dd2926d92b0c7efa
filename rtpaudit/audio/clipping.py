"""Samples at the extremes of the code, and peaks that were cut off below them before the call was encoded."""

from dataclasses import dataclass

import numpy as np

from rtpaudit.audio.level import FULL_SCALE
from rtpaudit.audio.scan import Samples, Scan
from rtpaudit.units import percent

CEILING_BLOCKS = 20
"""blocks of 10 ms that peak at the very same magnitude, at least (common practice)"""
CEILING_SHARE = 0.15
"""of the blocks that come within 6 dB of it: peaks of speech thin out towards the largest (common practice)"""
CEILING_SPREAD_DB = 1.0
"""by which the power of these blocks varies; that of a steady tone does not (common practice)"""


@dataclass(frozen=True, slots=True)
class Clipping:
    """What was cut off, and where."""

    clipped_pct: float
    """share of received samples in runs of two or more at the extremes of the code; NaN where none was received"""
    runs: int
    longest_run_samples: int
    ceiling_dbov: float
    """peak level at which the sound was cut off below the extremes; NaN where it was not"""
    at_ceiling_pct: float
    """share of received samples at that ceiling, 0 where there is none"""
    confidence_pct: float
    """of the ceiling; that of samples at the extremes is beyond doubt"""


def clipping_of(samples: Samples, scanned: Scan, low: int, high: int) -> Clipping:
    """Clipping at the extremes of the code, and at a ceiling below them.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    scanned : Scan
        Of these samples.
    low, high : int
        Extremes of the code, as in ``scan.EXTREMES``.

    Returns
    -------
    Clipping

    Notes
    -----
    Common practice: two neighbours at one extreme. A ceiling shows in that many blocks, soft and loud ones, peak at the
    very same magnitude, while peaks of speech thin out towards the largest.
    """
    received = int(scanned.received.sum())
    ceiling, confidence = _ceiling(scanned) if scanned.peak.max(initial=0) < min(high, -low) else (0, 0.0)
    at_ceiling = 0
    if ceiling:
        at = np.flatnonzero(scanned.peak == ceiling)
        whole = at[at < len(samples) // scanned.block_samples]
        blocks = samples[: len(samples) // scanned.block_samples * scanned.block_samples]
        blocks = blocks.reshape(-1, scanned.block_samples)[whole]
        at_ceiling = int((np.abs(blocks.astype(np.int32)) == ceiling).sum())
    return Clipping(
        percent(int(scanned.clipped.sum()), received),
        scanned.clipped_runs,
        scanned.longest_clipped_run,
        20.0 * float(np.log10(ceiling / FULL_SCALE)) if ceiling else float("nan"),
        percent(at_ceiling, received) if ceiling else 0.0,
        confidence,
    )


def _ceiling(scanned: Scan) -> tuple[int, float]:
    """Magnitude at which the peaks are cut off and the confidence in it [%]; 0 where they are not."""
    highest = int(scanned.peak.max(initial=0))
    at = scanned.peak == highest
    count, near = int(at.sum()), int((2 * scanned.peak >= highest).sum())
    if highest == 0 or count < CEILING_BLOCKS or count < CEILING_SHARE * near:
        return 0, 0.0
    spread = float(np.std(10.0 * np.log10(scanned.energy[at])))
    if spread < CEILING_SPREAD_DB:
        return 0, 0.0
    return highest, min(99.0, 60.0 + 100.0 * (count / near - CEILING_SHARE))
