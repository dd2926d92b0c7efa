"""A stream in windows of two seconds, a cut of our own: what was expected and lost, jitter, and delay variation."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.kernels import kernel
from rtpaudit.metrics.arrays import column
from rtpaudit.units import NS_PER_S

Counts = NDArray[np.int64]
Floats = NDArray[np.float64]

WINDOW_S = 2
WINDOW_NS = WINDOW_S * NS_PER_S

MOST_WINDOWS = 1 << 17
"""Three days; what a mad capture clock puts beyond counts in the last window."""

LONGEST_RUN_NS = 1 << 60
PERCENTILE = 0.95
LONGEST_DELAY_NS = (1 << 42) - 1
"""Delay variation above 73 minutes counts as that much."""


@dataclass(frozen=True, slots=True)
class Windows:
    """Window k goes from 2k to 2k + 2 s after the first arrival. Shape (windows,)."""

    from_s: Floats
    packets_expected: Counts
    packets_lost: Counts
    loss_pct: Floats
    """NaN where nothing was expected"""
    jitter_ms: Floats
    """last value of the estimator in the window, NaN without a packet"""
    pdv_p95_ms: Floats


def window_count(time_ns: ArrayLike, started_ns: int) -> int:
    """Windows from the first to the last arrival, at least one."""
    latest = int(np.max(column(time_ns, np.int64), initial=started_ns))
    return min(max((latest - started_ns) // WINDOW_NS, 0) + 1, MOST_WINDOWS)


def window_of(time_ns: ArrayLike, started_ns: int, count: int) -> Counts:
    """Which of ``count`` windows each time lies in; times outside belong to the first or the last.

    Parameters
    ----------
    time_ns : int64 array, shape (n,)
        [ns]
    started_ns : int
        [ns]
    count : int

    Returns
    -------
    int64 array, shape (n,)
    """
    time = column(time_ns, np.int64)
    window = np.empty(len(time), np.int64)
    _place(time, started_ns, count, window)
    return window


def count_missing(at_ns: ArrayLike, packets: ArrayLike, spacing_ns: ArrayLike, started_ns: int, count: int) -> Counts:
    """Missing packets per window, each at its media time.

    Parameters
    ----------
    at_ns, packets, spacing_ns : int64 arrays, shape (gaps,)
        The j-th packet of a run is missing at ``at_ns + j * spacing_ns``. [ns], [packets], [ns]
    started_ns : int
        [ns]
    count : int

    Returns
    -------
    int64 array, shape (count,)
        Adds up to all missing packets. [packets]
    """
    at = column(at_ns, np.int64)
    lost = np.zeros(count, np.int64)
    if len(at):
        _spread(
            at,
            column(packets, np.int64, len(at)),
            column(spacing_ns, np.int64, len(at)),
            started_ns,
            lost,
        )
    return lost


def percentile_per_window(values_ms: ArrayLike, window: Counts, count: int) -> Floats:
    """95th percentile of the values in each window by linear interpolation, to the nanosecond.

    Parameters
    ----------
    values_ms : float64 array, shape (n,)
        Not negative. [ms]
    window : int64 array, shape (n,)
    count : int

    Returns
    -------
    float64 array, shape (count,)
        NaN where a window has no value. [ms]
    """
    # Window and value in one number: a single sort then ranks every window.
    value_ns = np.minimum(np.rint(column(values_ms, np.float64) * 1e6), LONGEST_DELAY_NS).astype(np.int64)
    ranked = np.sort(window << 42 | value_ns) & LONGEST_DELAY_NS
    number = np.bincount(window, minlength=count)
    used = np.flatnonzero(number)
    first = (np.cumsum(number) - number)[used]
    rank = PERCENTILE * (number[used] - 1)
    low = rank.astype(np.int64)
    high = np.minimum(low + 1, number[used] - 1)
    below, above = ranked[first + low], ranked[first + high]
    found = np.full(count, np.nan)
    found[used] = (below + (above - below) * (rank - low)) / 1e6
    return found


def last_per_window(values: Floats, window: Counts, count: int) -> Floats:
    """Last of the values, shape (n,), in each window; NaN where it has none. Same unit as the values."""
    found = np.full(count, np.nan)
    found[window] = values
    return found


@kernel
def _place(time_ns: NDArray[np.int64], started_ns: int, count: int, window: Counts) -> None:
    """Window of each time; divides only where a time leaves the window of the one before."""
    k = 0
    begin = started_ns
    for i in range(len(time_ns)):
        after = time_ns[i] - begin
        if after < 0 or after >= WINDOW_NS:
            k = min(max((time_ns[i] - started_ns) // WINDOW_NS, 0), count - 1)
            begin = started_ns + k * WINDOW_NS
        window[i] = k


@kernel
def _spread(
    at_ns: NDArray[np.int64],
    packets: NDArray[np.int64],
    spacing_ns: NDArray[np.int64],
    started_ns: int,
    lost: Counts,
) -> None:
    """Adds each run to the windows that it goes through, window by window."""
    last = len(lost) - 1
    for run in range(len(at_ns)):
        # Forged numbers must not carry the sum over the end of int64.
        spacing = min(spacing_ns[run], LONGEST_RUN_NS // packets[run])
        origin = at_ns[run] - started_ns
        done = 0
        while done < packets[run]:
            k = min(max((origin + (done + 1) * spacing) // WINDOW_NS, 0), last)
            until = packets[run]
            if k < last and spacing > 0:
                until = min(until, max((WINDOW_NS * (k + 1) - 1 - origin) // spacing, done + 1))
            lost[k] += until - done
            done = until
