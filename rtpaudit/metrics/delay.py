"""Packet delay variation of RFC 5481."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.metrics.arrays import column
from rtpaudit.units import MS_PER_S, NS_PER_MS

Milliseconds = NDArray[np.float64]
PERCENTILES = (50.0, 95.0, 99.0)
PARTS_PER_MILLION = 1e-6
NAN = float("nan")


@dataclass(frozen=True, slots=True)
class DelayVariation:
    """Linear percentiles and maximum of the packet delay variation; NaN where there is no packet."""

    p50_ms: float
    p95_ms: float
    p99_ms: float
    max_ms: float


@dataclass(frozen=True, slots=True)
class Delays:
    """Delay of each packet of a stream, known up to one constant per timeline. Shape (n,)."""

    elapsed_ms: Milliseconds
    """arrival since the first packet"""
    delay_ms: Milliseconds
    """arrival minus media time"""
    timeline: NDArray[np.int32] | None
    """which of several timelines the packet belongs to (segment and clock rate); none where there is but one"""


def delays(time_ns: ArrayLike, media_ticks: ArrayLike, segment: ArrayLike, clock_rate_hz: ArrayLike) -> Delays:
    """Arrival minus media time, each counted from the first packet.

    Parameters
    ----------
    time_ns : int64 array, shape (n,)
        Arrival, in order of arrival. [ns]
    media_ticks : int64 array, shape (n,)
        [ticks]
    segment : int32 array, shape (n,)
    clock_rate_hz : int32 array, shape (n,), or one number
        Above 0. [Hz]

    Returns
    -------
    Delays
        Between two segments, or two clock rates, timestamps have no common origin: each pair of them is a timeline.
    """
    time = column(time_ns, np.int64)
    n = len(time)
    ticks = column(media_ticks, np.int64, n)
    segments = column(segment, np.int32, n)
    rate = column(clock_rate_hz, np.int32, n)
    if n == 0:
        return Delays(np.empty(0), np.empty(0), None)
    timeline = None
    if rate.min() != rate.max() or segments.min() != segments.max():
        both = segments.astype(np.int64) << 32 | rate
        timeline = np.unique(both, return_inverse=True)[1].astype(np.int32)
    elapsed = (time - time[0]) / NS_PER_MS
    media = (ticks - ticks[0]) * (MS_PER_S / rate[0] if timeline is None else MS_PER_S / rate)
    return Delays(elapsed, elapsed - media, timeline)


def delay_variation(of: Delays, skew_ppm: float = float("nan")) -> Milliseconds:
    """Delay of each packet against the smallest of its timeline.

    Parameters
    ----------
    of : Delays
    skew_ppm : float, optional
        Skew of the sender's clock, which is removed; NaN removes nothing. [ppm]

    Returns
    -------
    float64 array, shape (n,)
        [ms]

    References
    ----------
    RFC 5481 4.2 (PDV), with the smallest delay as reference.
    """
    delay = of.delay_ms
    if not np.isnan(skew_ppm):
        # A fast sender's media time runs ahead of arrival, and so its delays seem to shrink.
        delay = delay + of.elapsed_ms * (skew_ppm * PARTS_PER_MILLION)
    if of.timeline is None:
        return delay - delay.min() if len(delay) else delay
    smallest = np.full(int(of.timeline.max()) + 1, np.inf)
    np.minimum.at(smallest, of.timeline, delay)
    return np.asarray(delay - smallest[of.timeline])


def summarize(variation: Milliseconds) -> DelayVariation:
    """Linear percentiles and maximum of the delay variation, shape (n,). [ms]"""
    if len(variation) == 0:
        return DelayVariation(NAN, NAN, NAN, NAN)
    ranked = np.sort(variation)
    p50, p95, p99 = (percentile(ranked, share) for share in PERCENTILES)
    return DelayVariation(p50, p95, p99, float(ranked[-1]))


def percentile(ranked: Milliseconds, share_pct: float) -> float:
    """Percentile of sorted values by linear interpolation between closest ranks; same unit as the values."""
    rank = share_pct / 100.0 * (len(ranked) - 1)
    low = int(rank)
    high = min(low + 1, len(ranked) - 1)
    return float(ranked[low] + (ranked[high] - ranked[low]) * (rank - low))
