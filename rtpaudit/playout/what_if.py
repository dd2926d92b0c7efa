"""What another setting of a fixed playout buffer would have done to the same arrivals."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.units import NS_PER_MS

Nanoseconds = NDArray[np.int64]
Figures = NDArray[np.float64]

GRID_MS: Figures = np.arange(0.0, 301.0, 5.0)
"""delays that are tried: below a packet time nothing is gained, above 300 ms talking together suffers (ITU-T G.114)"""


@dataclass(frozen=True, slots=True)
class WhatIf:
    """Figures by nominal delay of a fixed buffer, columns of shape (delays,)."""

    delay_ms: Figures
    discard_pct: Figures
    """late packets, share of those expected"""
    lost_pct: Figures
    """missing and late packets together, share of those expected: Ppl of ITU-T G.107"""
    burst_ratio: Figures
    """BurstR of missing and late packets together; NaN where there are none, or nothing else"""
    mean_delay_ms: Figures
    """mean time that a played packet spends in the buffer; NaN where none is played"""


def what_if(
    required_ns: Nanoseconds,
    sequence: NDArray[np.int64],
    segment: NDArray[np.int32],
    audio: NDArray[np.bool_] | None = None,
    delay_ms: Figures = GRID_MS,
) -> WhatIf:
    """Loss, discards, burstiness and delay of a fixed buffer for each of many nominal delays.

    Parameters
    ----------
    required_ns : int64 array, shape (audio packets,)
        ``Played.required_ns`` of a fixed buffer, in order of arrival. [ns]
    sequence, segment : integer arrays, shape (n,)
        Extended sequence numbers and segments of all distinct packets, in order of arrival.
    audio : bool array, shape (n,), optional
        Which of them the audio packets are; the others are in time for any buffer.
    delay_ms : float array, shape (delays,)
        Nominal delays to try, ascending. [ms]

    Returns
    -------
    WhatIf

    Notes
    -----
    A packet is in time from its own required delay on, so each packet is looked at once: it adds to all delays below
    that, and a run of lost packets begins in it at the delays which it misses and its predecessor does not.

    References
    ----------
    ITU-T G.107 (06/2015), packet loss: BurstR is the mean run of lost packets over that of random loss, 1 / (1 - p).
    """
    grid_ns = np.rint(delay_ms * NS_PER_MS).astype(np.int64)
    order = np.lexsort((sequence, segment))
    from_delay = np.zeros(len(order), np.int64)
    late_until = np.searchsorted(grid_ns, required_ns)
    from_delay[slice(None) if audio is None else audio] = late_until
    from_delay = from_delay[order]
    missing = np.where(np.diff(segment[order]) == 0, np.maximum(np.diff(sequence[order]) - 1, 0), 0)
    expected = len(order) + int(missing.sum())

    late = _beyond(late_until, len(grid_ns))
    lost = late + int(missing.sum())
    runs = _runs(from_delay, missing > 0, len(grid_ns))
    in_time_ns = np.cumsum(np.bincount(late_until, required_ns, len(grid_ns) + 1))[:-1]
    with np.errstate(invalid="ignore", divide="ignore"):
        played = np.where(late < len(required_ns), len(required_ns) - late, np.nan)
        return WhatIf(
            delay_ms=delay_ms,
            discard_pct=100.0 * late / expected,
            lost_pct=100.0 * lost / expected,
            burst_ratio=np.where((lost > 0) & (lost < expected), lost / runs * (1.0 - lost / expected), np.nan),
            mean_delay_ms=delay_ms - in_time_ns / played / NS_PER_MS,
        )


def _beyond(late_until: NDArray[np.int64], delays: int) -> NDArray[np.int64]:
    """How many packets each delay is too short for."""
    return len(late_until) - np.cumsum(np.bincount(late_until, minlength=delays + 1))[:-1]


def _runs(late_until: NDArray[np.int64], gap_before: NDArray[np.bool_], delays: int) -> NDArray[np.int64]:
    """Runs of lost packets at each delay. Packets in order of sequence; ``gap_before`` begins with the second."""
    changes = np.zeros(delays + 1, np.int64)
    if len(late_until) == 0:
        return changes[:-1]
    before, now = late_until[:-1], late_until[1:]
    changes[0] = late_until[0] > 0
    changes -= np.bincount(late_until[:1], minlength=delays + 1) * (late_until[0] > 0)
    begins = ~gap_before & (now > before)
    changes += np.bincount(before[begins], minlength=delays + 1)
    changes -= np.bincount(now[begins], minlength=delays + 1)
    changes += np.bincount(before[gap_before], minlength=delays + 1)
    return np.cumsum(changes)[:-1]
