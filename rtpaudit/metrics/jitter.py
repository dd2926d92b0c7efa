"""Interarrival jitter of RFC 3550."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.kernels import kernel
from rtpaudit.metrics.arrays import column
from rtpaudit.units import MS_PER_S, NS_PER_MS

Milliseconds = NDArray[np.float64]

NOISE_REDUCTION = 16.0
"""Divisor of the estimator (RFC 3550 6.4.1)."""


@dataclass(frozen=True, slots=True)
class JitterFigures:
    """Mean over all packets after the first, maximum, and last value of the estimator; NaN below two packets."""

    mean_ms: float
    max_ms: float
    last_ms: float


def interarrival_jitter(
    time_ns: ArrayLike, media_ticks: ArrayLike, segment: ArrayLike, clock_rate_hz: ArrayLike
) -> Milliseconds:
    """The estimator after each packet.

    Parameters
    ----------
    time_ns : int64 array, shape (n,)
        Arrival, in order of arrival, not of sequence. Duplicates, telephone events and comfort noise are left out by
        the caller. [ns]
    media_ticks : int64 array, shape (n,)
        [ticks]
    segment : int32 array, shape (n,)
    clock_rate_hz : int32 array, shape (n,), or one number
        Above 0. [Hz]

    Returns
    -------
    float64 array, shape (n,)
        Starts at 0. [ms]

    References
    ----------
    RFC 3550 6.4.1 and A.8, in floating point.

    Notes
    -----
    The first packet of a segment, or of another clock rate, adds no difference, nor does a late packet of an earlier
    segment: their timestamps have nothing in common. The estimate then stays as it is.
    """
    time = column(time_ns, np.int64)
    n = len(time)
    estimate = np.empty(n)
    _estimate(
        time,
        column(media_ticks, np.int64, n),
        column(segment, np.int32, n),
        column(clock_rate_hz, np.int32, n),
        estimate,
    )
    return estimate


def summarize(estimate: Milliseconds) -> JitterFigures:
    """What the table of streams shows of an estimator's course, shape (n,). [ms]"""
    if len(estimate) < 2:
        return JitterFigures(float("nan"), float("nan"), float("nan"))
    return JitterFigures(float(estimate[1:].mean()), float(estimate.max()), float(estimate[-1]))


@kernel
def _estimate(
    time_ns: NDArray[np.int64],
    media_ticks: NDArray[np.int64],
    segment: NDArray[np.int32],
    clock_rate_hz: NDArray[np.int32],
    estimate: Milliseconds,
) -> None:
    """J += (abs(D) - J) / 16 (RFC 3550 6.4.1)."""
    jitter = 0.0
    before = 0
    for i in range(len(time_ns)):
        if i > 0 and segment[i] >= segment[before]:
            if segment[i] == segment[before] and clock_rate_hz[i] == clock_rate_hz[before]:
                media_ms = (media_ticks[i] - media_ticks[before]) * MS_PER_S / clock_rate_hz[i]
                difference = (time_ns[i] - time_ns[before]) / NS_PER_MS - media_ms
                jitter += (abs(difference) - jitter) / NOISE_REDUCTION
            before = i
        estimate[i] = jitter
