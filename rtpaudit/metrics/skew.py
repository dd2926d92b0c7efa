"""Skew of the sender's media clock against the capture's clock."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel
from rtpaudit.metrics.delay import PARTS_PER_MILLION, Delays
from rtpaudit.metrics.steps import MAD_TO_DEVIATION, line, median, scatter, slope_error, split_at_steps, sturdy_line

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

SHORTEST_MS = 30_000.0
"""Audio that a skew is worth naming from."""

ROUNDING_MS = 1e-3
ALIKE = 0.9
"""Part of the audio that arrivals must span at least."""

FEWEST_PACKETS = 16
MOST_BLOCKS = 128
FEWEST_PER_BLOCK = 25
MOST_TIMELINES = 64
CLOCK_SET_MS = 1000.0
"""A delay that changes by more from one packet to the next: one of the two clocks was set, so time itself jumps."""

MOST_CLOCK_SETS = 32

SMALL_SCATTER_MS = 0.1
"""Scatter of block minima up to which the envelope is good enough whatever the means do."""

MOST_PPM = 5000.0
"""No clock of audio is off by so much (common practice): such a slope is a growing queue, or a fault of timestamps."""

STEEPEST = 0.1
"""Bound of the search, as a slope on top of the first guess."""


@dataclass(frozen=True, slots=True)
class Blocks:
    """A stream in blocks of like many packets. Shape (blocks,), ordered by piece, then time."""

    piece: Indices
    """stretches that share one constant of the delay"""
    packets: Floats
    low_at: Floats
    low: Floats
    """smallest delay of the block, and when it was [ms]"""
    mean_at: Floats
    mean: Floats
    """mean delay, and mean time [ms]"""


@dataclass(frozen=True, slots=True)
class Skew:
    """Skew of the sender's media clock and its standard error; NaN below 30 s of audio. [ppm]"""

    ppm: float
    error_ppm: float


def clock_skew(of: Delays) -> Skew:
    """Skew of the sender's media clock, positive where the sender is fast.

    Parameters
    ----------
    of : Delays
        Of the audio packets of one stream.

    Returns
    -------
    Skew
        NaN below 30 s of audio, and where no clock can be so far off. The error takes what blocks are off the line for
        independent, so it is about right for jitter and too small for delays that wander.

    References
    ----------
    Moon, Skelly, Towsley: Estimation and removal of clock skew from network delay measurements, IEEE INFOCOM 1999
    (from memory): the line under all delays with the least sum of distances, which is the edge of their lower convex
    hull over the mean time.

    Notes
    -----
    Two safeguards go beyond that paper. A delay that steps (another route, a capture clock that was set) splits the
    stream into pieces that share the slope and have a constant each. And where the delay scatters to both sides, so
    that block means scatter less than block minima, the slope is the least-squares one of the means: a lower envelope
    needs packets that met no queue.
    """
    if len(of.delay_ms) < FEWEST_PACKETS or not _long_enough(of):
        return Skew(float("nan"), float("nan"))
    raw = _blocks(of, 0.0)
    guess = _lagged_slope(raw)
    blocks = _blocks(of, guess)
    if scatter(blocks.low) <= max(scatter(blocks.mean), SMALL_SCATTER_MS):
        slope, error = _under_minima(blocks)
    else:
        piece = split_at_steps(blocks.mean_at, blocks.mean, blocks.piece)
        slope, rest = sturdy_line(blocks.mean_at, blocks.mean, blocks.packets, piece)
        error = slope_error(blocks.mean_at, rest, piece)
    ppm = -(guess + slope) / PARTS_PER_MILLION
    return Skew(ppm, error / PARTS_PER_MILLION) if abs(ppm) <= MOST_PPM else Skew(float("nan"), float("nan"))


def _long_enough(of: Delays) -> bool:
    """Whether there is so much audio by the timestamps, and arrivals bear it out: a clock that is set moves but one."""
    media = of.elapsed_ms - of.delay_ms
    names = np.empty(0, np.int32) if of.timeline is None else np.unique(of.timeline)
    if len(names) > MOST_TIMELINES:
        return False
    timelines = [of.timeline == name for name in names] or [slice(None)]
    audio, capture = (sum(float(np.ptp(time[rows])) for rows in timelines) for time in (media, of.elapsed_ms))
    n = len(media)
    return audio * n / (n - 1) >= SHORTEST_MS - ROUNDING_MS and capture >= SHORTEST_MS * ALIKE


def _blocks(of: Delays, slope: float) -> Blocks:
    """Delays less a slope, in blocks."""
    n = len(of.delay_ms)
    size = max(-(-n // MOST_BLOCKS), min(FEWEST_PER_BLOCK, n // FEWEST_PACKETS))
    most = 4 * MOST_BLOCKS
    columns = np.empty((5, most))
    piece = np.empty(most, np.int64)
    timeline = np.zeros(1, np.int32) if of.timeline is None else of.timeline
    count = _gather(of.elapsed_ms, of.delay_ms, timeline, slope, size, piece, columns)
    piece, columns = piece[:count], columns[:, :count]
    if piece[0] != piece[-1] or of.timeline is not None:
        order = np.argsort(piece, kind="stable")
        columns = columns[:, order]
        piece = np.unique(piece[order], return_inverse=True)[1]
    return Blocks(piece, *columns)


def _lagged_slope(of: Blocks) -> float:
    """Median slope between block minima an eighth of the stream apart: a few steps leave it alone."""
    lag = max(1, len(of.low) // 8)
    alike = of.piece[lag:] == of.piece[:-lag]
    run, rise = (of.low_at[lag:] - of.low_at[:-lag])[alike], (of.low[lag:] - of.low[:-lag])[alike]
    rising = run > 0
    return median(rise[rising] / run[rising]) if rising.any() else 0.0


def _under_minima(of: Blocks) -> tuple[float, float]:
    """Slope of the line under the block minima with the least sum of distances to all packets, and its error."""
    piece = split_at_steps(of.low_at, of.low, of.piece)
    mean_slope, rest = line(of.low_at, of.low, of.packets, piece)
    # A single packet far too early (a glitch of the capture clock) would hold the line down.
    sound = rest >= -8 * MAD_TO_DEVIATION * max(median(np.abs(rest)), 1e-3)
    kept = np.unique(piece[sound], return_inverse=True)[1]
    slope = _supporting_slope(of.low_at[sound], of.low[sound], of.packets[sound], of.mean_at[sound], kept)
    return float(slope), max(slope_error(of.low_at, rest, piece), abs(float(slope) - mean_slope))


@kernel
def _gather(
    elapsed: Floats,
    delay: Floats,
    timeline: NDArray[np.int32],
    slope: float,
    size: int,
    piece: Indices,
    columns: Floats,
) -> int:
    """Fills blocks of ``size`` packets; one ends early where the timeline changes or a clock was set."""
    count, packets, clock_sets = -1, size, 0
    one = len(timeline) == 1
    for i in range(len(elapsed)):
        at = elapsed[i]
        level = delay[i] - slope * at
        own = 0 if one else timeline[i]
        alike = i > 0 and (one or own == timeline[i - 1])
        if alike and abs(delay[i] - delay[i - 1]) > CLOCK_SET_MS and clock_sets < MOST_CLOCK_SETS:
            clock_sets += 1
        name = own + clock_sets * MOST_TIMELINES
        if packets >= size or piece[count] != name:
            if count + 1 == len(piece):
                break
            count += 1
            packets = 0
            piece[count] = name
            columns[0, count] = columns[3, count] = columns[4, count] = 0.0
            columns[2, count] = np.inf
        if level < columns[2, count]:
            columns[1, count], columns[2, count] = at, level
        packets += 1
        columns[0, count] += 1.0
        columns[3, count] += at
        columns[4, count] += level
    for k in range(count + 1):
        columns[3, k] /= columns[0, k]
        columns[4, k] /= columns[0, k]
    return count + 1


@kernel
def _supporting_slope(at: Floats, low: Floats, packets: Floats, mean_at: Floats, piece: Indices) -> float:
    """Least sum of distances to a line under each piece, by bisection of its derivative along the slope."""
    below, above = -STEEPEST, STEEPEST
    for _ in range(48):
        slope = (below + above) / 2
        gradient = 0.0
        first = 0
        for i in range(len(at) + 1):
            if i == len(at) or piece[i] != piece[first]:
                touch = first
                weight = 0.0
                for j in range(first, i):
                    if low[j] - slope * at[j] < low[touch] - slope * at[touch]:
                        touch = j
                    weight += packets[j]
                    gradient -= packets[j] * mean_at[j]
                gradient += weight * at[touch]
                first = i
        if gradient < 0:
            below = slope
        else:
            above = slope
    return (below + above) / 2
