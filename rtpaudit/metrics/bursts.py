"""How loss clusters: the burst ratio of the E-model, and bursts and gaps of RFC 3611."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.metrics.arrays import column
from rtpaudit.units import percent

GMIN = 16
"""Received packets in a row that end a burst (RFC 3611 4.7.2, recommended value)."""


@dataclass(frozen=True, slots=True)
class LossRuns:
    """Runs of lost packets among all expected ones. Shape (runs,)."""

    first: NDArray[np.int64]
    """place of the first lost packet, counted from 0"""
    length: NDArray[np.int64]
    expected: int

    @property
    def lost(self) -> int:
        """Lost packets of all runs. [packets]"""
        return int(self.length.sum())


@dataclass(frozen=True, slots=True)
class BurstGap:
    """Bursts and gaps of RFC 3611 4.7.2."""

    burst_density_pct: float
    burst_duration_ms: float
    gap_density_pct: float
    gap_duration_ms: float


def loss_runs(place: ArrayLike, expected: int) -> LossRuns:
    """Runs of packets that were not received, or not played.

    Parameters
    ----------
    place : int64 array, shape (played,)
        Places of the good packets among the expected ones, rising, as in ``loss.Sequence``. Leave out those that were
        discarded, and they count as lost.
    expected : int
        [packets]

    Raises
    ------
    ValueError
        If nothing was expected: a stream has at least one expected packet.
    """
    if expected < 1:
        raise ValueError("a stream has at least one expected packet")
    good = column(place, np.int64)
    if len(good) == expected:
        return LossRuns(np.empty(0, np.int64), np.empty(0, np.int64), expected)
    step = np.diff(good, prepend=-1, append=expected)
    where = np.flatnonzero(step > 1)
    return LossRuns(np.concatenate([[-1], good])[where] + 1, step[where] - 1, expected)


def runs_in(received: ArrayLike) -> LossRuns:
    """The same from a mask of shape (n,), one element per expected packet in sequence order, true where it was good."""
    mask = column(received, np.bool_)
    return loss_runs(np.flatnonzero(mask), len(mask))


def burst_ratio(runs: LossRuns) -> float:
    """Mean run of lost packets over the mean run that random loss of the same rate would give.

    Parameters
    ----------
    runs : LossRuns
        Discarded packets count as lost.

    Returns
    -------
    float
        BurstR, about 1 for random loss, NaN where nothing was lost, or everything. [no unit]

    References
    ----------
    ITU-T G.107 (06/2015), 7.5, packet-loss burstiness: random loss of probability p gives runs of mean 1 / (1 - p).
    """
    lost = runs.lost
    if lost in (0, runs.expected):
        return float("nan")
    return lost / len(runs.length) * (1.0 - lost / runs.expected)


def bursts_and_gaps(runs: LossRuns, packet_time_ms: float, gmin: int = GMIN) -> BurstGap:
    """Densities and mean durations of bursts and gaps.

    Parameters
    ----------
    runs : LossRuns
        Discarded packets count as lost.
    packet_time_ms : float
        Durations are packets times this; NaN gives NaN. [ms]
    gmin : int
        So many received packets in a row end a burst. [packets]

    Returns
    -------
    BurstGap
        Figures of bursts are 0 where there is none, likewise of gaps.

    References
    ----------
    RFC 3611 4.7.2, by its definition: a burst is the longest sequence that begins and ends with a lost packet and holds
    no ``gmin`` received packets in a row; a lost packet with ``gmin`` received ones on both sides belongs to a gap;
    before and after the stream all is taken as received.

    Notes
    -----
    The example of that clause prints a sum where the field asks for the mean, and Appendix A.2 run as printed disagrees
    with the clause; the clause is followed. A gap without packets (a burst at the very start or end) is none.
    """
    if len(runs.length) == 0:
        return BurstGap(0.0, 0.0, 0.0, runs.expected * packet_time_ms)
    end = runs.first + runs.length
    opens = np.flatnonzero(np.concatenate([[True], runs.first[1:] - end[:-1] >= gmin]))
    closes = np.concatenate([opens[1:], [len(end)]]) - 1
    lost = np.add.reduceat(runs.length, opens)
    burst = lost > 1
    bursts, burst_lost = int(burst.sum()), int(lost[burst].sum())
    first, past = runs.first[opens][burst], end[closes][burst]
    in_bursts = int((past - first).sum())
    in_gaps = runs.expected - in_bursts
    gaps = bursts + 1 - (int(first[0] == 0) + int(past[-1] == runs.expected) if bursts else 0)
    return BurstGap(
        burst_density_pct=percent(burst_lost, in_bursts) if bursts else 0.0,
        burst_duration_ms=in_bursts / bursts * packet_time_ms if bursts else 0.0,
        gap_density_pct=percent(runs.lost - burst_lost, in_gaps) if in_gaps else 0.0,
        gap_duration_ms=in_gaps / gaps * packet_time_ms if in_gaps else 0.0,
    )
