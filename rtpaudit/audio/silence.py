"""Dead air: passages in which there is nothing to hear, not even the noise of a room."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import dbov
from rtpaudit.audio.scan import BLOCKS_PER_S, Mask, Scan
from rtpaudit.units import percent

DEAD_AIR_DBOV = -65.0
"""below which a listener takes the line for dead; comfort noise is louder (common practice)"""
DEAD_AIR_S = 3.0
"""after which a talker asks whether anybody is there (common practice)"""
CLICK_BLOCKS = 5
"""blocks of 10 ms that sound for less do not end a passage (common practice)"""


@dataclass(frozen=True, slots=True)
class Passage:
    """A stretch of the timeline."""

    from_s: float
    to_s: float
    level_dbov: float
    """of what was received in it; NaN where nothing was"""
    received_pct: float

    @property
    def duration_s(self) -> float:
        """Length of the passage. [s]"""
        return self.to_s - self.from_s


def silent_blocks(scanned: Scan, limit_dbov: float = DEAD_AIR_DBOV) -> Mask:
    """Which blocks are below a level, or were not received. Shape (blocks,)."""
    return np.asarray((scanned.received == 0) | (dbov(np.nan_to_num(scanned.power())) < limit_dbov))


def dead_air(scanned: Scan, limit_dbov: float = DEAD_AIR_DBOV, least_s: float = DEAD_AIR_S) -> list[Passage]:
    """Passages of one stream in which there was nothing to hear.

    Parameters
    ----------
    scanned : Scan
    limit_dbov : float
        What is below it is nothing. [dBov]
    least_s : float
        Shorter passages are pauses. [s]

    Returns
    -------
    list of Passage
        In order of time. That one side is silent while the other speaks is no fault: see ``dead_air_together``.
    """
    return _passages(silent_blocks(scanned, limit_dbov), scanned, least_s)


def dead_air_together(
    one: Scan, other: Scan, lead_s: float, limit_dbov: float = DEAD_AIR_DBOV, least_s: float = DEAD_AIR_S
) -> list[Passage]:
    """Passages in which neither side of a call had anything to hear.

    Parameters
    ----------
    one, other : Scan
        The two directions. Where one has not begun or has ended, it has nothing to hear.
    lead_s : float
        By how much ``one`` began before ``other``, negative where after. [s]
    limit_dbov, least_s : float
        As for ``dead_air``.

    Returns
    -------
    list of Passage
        Times, level and share received are those of ``one``.
    """
    silent = silent_blocks(one, limit_dbov)
    shift = round(lead_s * BLOCKS_PER_S)
    there = silent_blocks(other, limit_dbov)[max(0, -shift) : max(0, len(silent) - shift)]
    begin = max(0, shift)
    silent[begin : begin + len(there)] &= there
    return _passages(silent, one, least_s)


def _passages(silent: Mask, scanned: Scan, least_s: float) -> list[Passage]:
    """Runs of silent blocks that last, clicks in them passed over."""
    starts, ends = _runs(silent)
    if not len(starts):
        return []
    joined = starts[1:] - ends[:-1] < CLICK_BLOCKS
    starts, ends = starts[np.concatenate([[True], ~joined])], ends[np.concatenate([~joined, [True]])]
    lasting = (ends - starts) >= least_s * BLOCKS_PER_S
    places, power = zip(starts[lasting].tolist(), ends[lasting].tolist(), strict=True), scanned.power()
    return [_passage(scanned, power, start, end) for start, end in places]


def _passage(scanned: Scan, power_of_blocks: NDArray[np.float64], start: int, end: int) -> Passage:
    seconds = scanned.block_samples / scanned.sampling_rate_hz
    received = scanned.received[start:end]
    power = np.nansum(power_of_blocks[start:end] * received)
    total = int(received.sum())
    last = min(end * scanned.block_samples, scanned.samples)
    return Passage(
        start * seconds,
        last / scanned.sampling_rate_hz,
        float(dbov(power / total)) if total else float("nan"),
        percent(total, last - start * scanned.block_samples),
    )


def _runs(flags: Mask) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """First element of each run of True, and the one after its last."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8)))
    return edges[::2], edges[1::2]
