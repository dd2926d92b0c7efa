"""Where to cut a clip out of a stream: in pauses around a place, so that no word is torn."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import THRESHOLDS_DB, SpeechLevel
from rtpaudit.audio.scan import BLOCKS_PER_S, Scan

Blocks = NDArray[np.int64]

SPREAD = 0.2
"""a clip may be so much shorter or longer than the profile's length: 8 to 12 s at 10 s"""
LEAST_SHARE = 0.3
"""of that length, below which a stream is too short for a clip"""
LEAD_S, TAIL_S = 0.2, 0.1
"""of the pause that stay before and after the speech; the hangover of P.56 holds 0.2 s more at the end"""
QUIET_BLOCKS = 5
LEAST_SPEECH = 0.3
"""share of the clip in which somebody speaks (common practice)"""


@dataclass(frozen=True, slots=True)
class Cut:
    """A stretch of a stream in blocks of 10 ms."""

    begin: int
    end: int
    in_pauses: bool
    """False where the speech goes on, and it was cut where it is softest"""

    def overlaps(self, others: Sequence["Cut"]) -> bool:
        """Whether it shares sound with another."""
        return any(self.begin < other.end and other.begin < self.end for other in others)


def cut_around(
    scanned: Scan, level: SpeechLevel, begin_s: float, end_s: float, aim_s: float, taken: Sequence[Cut] = ()
) -> Cut | None:
    """The stretch around a place that is cut best, None where there is none with speech beside those taken.

    Parameters
    ----------
    scanned : Scan
        Of the whole stream.
    level : SpeechLevel
        Of the same.
    begin_s, end_s : float
        The place that the clip has to hold. [s]
    aim_s : float
        Length to aim at. [s]
    taken : sequence of Cut
        Clips of the same stream.
    """
    active = _active(scanned, level)
    first, last = round(begin_s * BLOCKS_PER_S), round(end_s * BLOCKS_PER_S)
    first, last = max(0, min(first, len(active))), max(0, min(last, len(active)))
    shortest, longest = round((1 - SPREAD) * aim_s * BLOCKS_PER_S), round((1 + SPREAD) * aim_s * BLOCKS_PER_S)
    if len(active) <= longest:
        found = [Cut(0, len(active), True)] if len(active) >= LEAST_SHARE * aim_s * BLOCKS_PER_S else []
    else:
        found = [
            *_in_pauses(scanned, active, first, last, shortest, longest),
            *_where_soft(scanned, first, last, aim_s),
        ]
    fit = (one for one in found if not one.overlaps(taken) and active[one.begin : one.end].mean() >= LEAST_SPEECH)
    return next(fit, None)


def _active(scanned: Scan, level: SpeechLevel) -> NDArray[np.bool_]:
    """Blocks of speech by the threshold and hangover of P.56, method B."""
    if np.isnan(level.threshold_dbov):
        return np.zeros(len(scanned.reached), np.bool_)
    return np.asarray(scanned.reached >= np.searchsorted(THRESHOLDS_DB, level.threshold_dbov + 1e-9))


def _in_pauses(
    scanned: Scan, active: NDArray[np.bool_], first: int, last: int, shortest: int, longest: int
) -> list[Cut]:
    """Stretches of permitted length between two pauses around the place, those first whose length and middle fit."""
    lead, tail = round(LEAD_S * BLOCKS_PER_S), round(TAIL_S * BLOCKS_PER_S)
    whole = ~active & (scanned.received >= scanned.block_samples)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], whole, [False]]).astype(np.int8)))
    opens, closes = edges[::2], edges[1::2]
    begins = np.unique(np.append(np.maximum(opens, closes - lead), 0))
    ends = np.unique(np.append(np.minimum(opens + tail, closes), len(active)))
    begins = begins[(begins <= first) & (begins > last - longest)]
    ends = ends[(ends >= last) & (ends < first + longest)]
    length = ends[None, :] - begins[:, None]
    off = np.abs(length - (shortest + longest) / 2) + np.abs(ends[None, :] + begins[:, None] - first - last) / 2
    rows, columns = np.nonzero((length >= shortest) & (length <= longest))
    best = np.argsort(off[rows, columns], kind="stable")
    return [Cut(int(begins[rows[k]]), int(ends[columns[k]]), True) for k in best.tolist()]


def _where_soft(scanned: Scan, first: int, last: int, aim_s: float) -> list[Cut]:
    """The stretch around the place that begins and ends where the sound is softest."""
    # What was not received is no soft place.
    power = np.nan_to_num(scanned.power(), nan=np.inf)
    soft = np.convolve(power, np.ones(QUIET_BLOCKS), mode="same")
    aim, half = round(aim_s * BLOCKS_PER_S), round(SPREAD / 2 * aim_s * BLOCKS_PER_S)
    middle = min(max((first + last) // 2, aim // 2 + half), len(power) - aim // 2 - half)
    begin, end = (_softest(soft, at - half, at + half) for at in (middle - aim // 2, middle + aim // 2))
    return [Cut(begin, end, False)]


def _softest(soft: NDArray[np.float64], low: int, high: int) -> int:
    low = max(low, 0)
    return low + int(np.argmin(soft[low:high]))
