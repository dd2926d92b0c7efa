"""All network figures of one stream in one call."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.metrics import delay, jitter
from rtpaudit.metrics.arrays import column
from rtpaudit.metrics.bursts import burst_ratio, bursts_and_gaps, loss_runs
from rtpaudit.metrics.gaps import Gaps, date_gaps, spacing_ns
from rtpaudit.metrics.loss import Sequence, in_sequence, missing_runs
from rtpaudit.metrics.skew import Skew, clock_skew
from rtpaudit.metrics.windows import (
    WINDOW_S,
    Windows,
    count_missing,
    last_per_window,
    percentile_per_window,
    window_count,
    window_of,
)
from rtpaudit.units import percent


@dataclass(frozen=True, slots=True)
class NetworkFigures:
    """Figures of one stream under the names of their columns, and the tables of its gaps and windows."""

    segments: int
    packets_captured: int
    packets_received: int
    packets_expected: int
    packets_lost: int
    loss_pct: float
    packets_duplicated: int
    packets_reordered: int
    sequence_gaps: int
    longest_gap_packets: int
    jitter_ms: float
    jitter_max_ms: float
    jitter_last_ms: float
    pdv_p50_ms: float
    pdv_p95_ms: float
    pdv_p99_ms: float
    pdv_max_ms: float
    clock_skew_ppm: float
    clock_skew_error_ppm: float
    """standard error, no column: whether a skew can be told from 0"""
    burst_ratio: float
    burst_density_pct: float
    burst_duration_ms: float
    gap_density_pct: float
    gap_duration_ms: float
    sequence: Sequence
    gaps: Gaps
    windows: Windows


@dataclass(frozen=True, slots=True)
class Timing:
    """Jitter and delay variation of the packets that can be timed. Shape (timed,)."""

    time_ns: NDArray[np.int64]
    jitter_ms: NDArray[np.float64]
    variation_ms: NDArray[np.float64]
    skew: Skew


def network_figures(
    time_ns: ArrayLike,
    extended: ArrayLike,
    segment: ArrayLike,
    duplicate: ArrayLike,
    media_ticks: ArrayLike,
    audio: ArrayLike,
    clock_rate_hz: ArrayLike,
    packet_time_ms: float,
    started_ns: int | None = None,
) -> NetworkFigures:
    """Loss, order, jitter, delay variation, skew, bursts, gaps and windows of one stream.

    Parameters
    ----------
    time_ns : int64 array, shape (n,)
        Arrival. All columns are in order of arrival. [ns]
    extended : int64 array, shape (n,)
        Unwrapped sequence number. [packets]
    segment : int32 array, shape (n,)
    duplicate : bool array, shape (n,)
    media_ticks : int64 array, shape (n,)
        Unwrapped timestamp. [ticks]
    audio : bool array, shape (n,)
        Neither telephone event nor comfort noise.
    clock_rate_hz : int32 array, shape (n,), or one number
        0 where it is unknown: such packets are not timed. [Hz]
    packet_time_ms : float
        Of most packets; NaN where it is unknown. [ms]
    started_ns : int, optional
        First arrival, from which windows and gaps are counted; by default that of the first packet. [ns]

    Returns
    -------
    NetworkFigures

    Raises
    ------
    ValueError
        If the columns differ in length, or hold no packet that is no duplicate.
    """
    time = column(time_ns, np.int64)
    n = len(time)
    numbers, segments = column(extended, np.int64, n), column(segment, np.int32, n)
    copies, voice = column(duplicate, np.bool_, n), column(audio, np.bool_, n)
    ticks, rate = column(media_ticks, np.int64, n), column(clock_rate_hz, np.int32, n)

    sequence = in_sequence(numbers, segments, copies)
    runs = missing_runs(sequence, numbers, segments)
    began = int(time[0]) if started_ns is None else started_ns
    gaps = date_gaps(runs, sequence, time, ticks, voice, rate, packet_time_ms, began)
    clusters = loss_runs(sequence.place, sequence.expected)
    burst_gap = bursts_and_gaps(clusters, packet_time_ms)
    timing = timed(time, ticks, segments, rate, voice & ~copies & (rate > 0))
    estimator, variation = jitter.summarize(timing.jitter_ms), delay.summarize(timing.variation_ms)
    return NetworkFigures(
        segments=sequence.segments,
        packets_captured=sequence.captured,
        packets_received=sequence.received,
        packets_expected=sequence.expected,
        packets_lost=sequence.lost,
        loss_pct=percent(sequence.lost, sequence.expected),
        packets_duplicated=sequence.duplicated,
        packets_reordered=sequence.reordered,
        sequence_gaps=sequence.gaps,
        longest_gap_packets=sequence.longest_gap,
        jitter_ms=estimator.mean_ms,
        jitter_max_ms=estimator.max_ms,
        jitter_last_ms=estimator.last_ms,
        pdv_p50_ms=variation.p50_ms,
        pdv_p95_ms=variation.p95_ms,
        pdv_p99_ms=variation.p99_ms,
        pdv_max_ms=variation.max_ms,
        clock_skew_ppm=timing.skew.ppm,
        clock_skew_error_ppm=timing.skew.error_ppm,
        burst_ratio=burst_ratio(clusters),
        burst_density_pct=burst_gap.burst_density_pct,
        burst_duration_ms=burst_gap.burst_duration_ms,
        gap_density_pct=burst_gap.gap_density_pct,
        gap_duration_ms=burst_gap.gap_duration_ms,
        sequence=sequence,
        gaps=gaps,
        windows=_in_windows(time, sequence, gaps, spacing_ns(gaps, runs, time), timing, began),
    )


def timed(
    time_ns: NDArray[np.int64],
    media_ticks: NDArray[np.int64],
    segment: NDArray[np.int32],
    clock_rate_hz: NDArray[np.int32],
    chosen: NDArray[np.bool_],
) -> Timing:
    """Jitter, skew and delay variation of the chosen packets; arguments as of ``network_figures``."""
    if not chosen.all():
        time_ns, media_ticks = time_ns[chosen], media_ticks[chosen]
        segment, clock_rate_hz = segment[chosen], clock_rate_hz[chosen]
    found = delay.delays(time_ns, media_ticks, segment, clock_rate_hz)
    skew = clock_skew(found)
    estimate = jitter.interarrival_jitter(time_ns, media_ticks, segment, clock_rate_hz)
    return Timing(time_ns, estimate, delay.delay_variation(found, skew.ppm), skew)


def _in_windows(
    time_ns: NDArray[np.int64],
    sequence: Sequence,
    gaps: Gaps,
    spacing: NDArray[np.int64],
    timing: Timing,
    started_ns: int,
) -> Windows:
    """The same stream laid along its time."""
    count = window_count(time_ns, started_ns)
    lost = count_missing(gaps.at_ns, gaps.packets_missing, spacing, started_ns, count)
    received = np.bincount(window_of(time_ns[sequence.order], started_ns, count), minlength=count)
    heard = window_of(timing.time_ns, started_ns, count)
    expected = received + lost
    with np.errstate(invalid="ignore"):
        share = 100.0 * lost / expected
    return Windows(
        from_s=np.arange(count, dtype=np.float64) * WINDOW_S,
        packets_expected=expected,
        packets_lost=lost,
        loss_pct=share,
        jitter_ms=last_per_window(timing.jitter_ms, heard, count),
        pdv_p95_ms=percentile_per_window(timing.variation_ms, heard, count),
    )
