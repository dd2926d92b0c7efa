"""Steps in a noisy series of levels, by a test of our own: another route, a capture clock that was set."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

MOST_STEPS = 8
STEP_SIGNIFICANCE = 7.0
"""Height of a step over its standard error, high enough that chance hardly makes one among all places."""

STEP_LEAST = 4.0
"""Height of a step over the noise from neighbour to neighbour: slow noise makes lesser ones."""

STEP_ABRUPTNESS = 0.5
"""Part of a step that must happen between neighbours; queues and warming clocks move more slowly."""

STEP_MEMBERS = 3
"""Fewest levels on either side of a step."""

MAD_TO_DEVIATION = 1.4826
"""Median absolute deviation to standard deviation of a normal distribution."""


def split_at_steps(at: Floats, level: Floats, piece: Indices) -> Indices:
    """Pieces split wherever the level steps, beside a slope that all share.

    Parameters
    ----------
    at, level : float64 arrays, shape (n,)
        In order of piece, then of ``at``.
    piece : int64 array, shape (n,)
        Stretches that have a constant of their own already, counted from 0.

    Returns
    -------
    int64 array, shape (n,)
        The same with a new piece from each step on.

    Notes
    -----
    Forward selection: again and again the step that explains most, until none is significant. Residuals are clipped, so
    that a short excursion cannot pass for a step.
    """
    noise = scatter(level)
    same = np.ones(len(level))
    for _ in range(MOST_STEPS if noise > 0 else 0):
        best = _clearest_step(at, level, piece, noise, same)
        if best < 0:
            break
        piece = piece + (np.arange(len(piece)) >= best)
    return piece


def _clearest_step(at: Floats, level: Floats, piece: Indices, noise: float, same: Floats) -> int:
    """Block before which the level steps most clearly beyond doubt, -1 where it does nowhere."""
    x, rest = within(at, same, piece), line(at, level, same, piece)[1]
    total = np.bincount(piece)
    place = np.arange(len(piece)) - (np.cumsum(total) - total)[piece]
    left = total[piece] - place
    # Square sum of a step at each block, once the constants of the pieces and the common slope are taken out of it.
    spread = max(float(np.dot(x, x)), np.finfo(float).tiny)
    run = _sum_before(x)
    power = place * left / total[piece] - run**2 / spread
    power[(place < STEP_MEMBERS) | (left < STEP_MEMBERS) | (power < 0.5)] = np.inf
    clipped = within(np.clip(rest, -4 * noise, 4 * noise), same, piece)
    clear = np.abs(_sum_before(clipped)) >= STEP_SIGNIFICANCE * noise * np.sqrt(power)
    if not clear.any():
        return -1
    height = -_sum_before(rest) / power
    # Between neighbours, on the slope that is left once the step is taken out.
    jump = _jump(rest) - height * run / spread * _jump(at)
    clear &= (jump * height >= STEP_ABRUPTNESS * height**2) & (np.abs(height) >= STEP_LEAST * noise)
    explained = np.where(clear, height**2 * np.where(clear, power, 0.0), 0.0)
    return int(explained.argmax()) if clear.any() else -1


def _jump(values: Floats) -> Floats:
    """Median of the few values from each on less the median of the few before it."""
    around = np.sort(np.lib.stride_tricks.sliding_window_view(values, STEP_MEMBERS), axis=1)[:, STEP_MEMBERS // 2]
    found = np.zeros(len(values))
    found[STEP_MEMBERS : len(values) - STEP_MEMBERS + 1] = around[STEP_MEMBERS:] - around[:-STEP_MEMBERS]
    return found


def _sum_before(values: Floats) -> Floats:
    """Sum of all values before each."""
    return np.cumsum(values) - values


def within(values: Floats, weight: Floats, piece: Indices) -> Floats:
    """Values less the mean of their piece."""
    return values - (np.bincount(piece, values * weight) / np.bincount(piece, weight))[piece]


def line(at: Floats, level: Floats, weight: Floats, piece: Indices) -> tuple[float, Floats]:
    """Least-squares slope that all pieces share, and what each block is off that line."""
    x, y = within(at, weight, piece), within(level, weight, piece)
    spread = float(np.dot(weight * x, x))
    slope = float(np.dot(weight * x, y)) / spread if spread > 0 else 0.0
    return slope, y - slope * x


def sturdy_line(at: Floats, level: Floats, weight: Floats, piece: Indices) -> tuple[float, Floats]:
    """The same with outlying levels left out of the fit."""
    slope, rest = line(at, level, weight, piece)
    for _ in range(3):
        far = 3 * MAD_TO_DEVIATION * median(np.abs(rest))
        # A trace of weight stays, so that no piece goes without any.
        used = np.where(np.abs(rest) <= far, weight, weight * 1e-9)
        slope, rest = line(at, level, used, piece)
    return slope, rest


def slope_error(at: Floats, rest: Floats, piece: Indices) -> float:
    """Standard error of the slope from what the levels are off its line."""
    x = within(at, np.ones(len(at)), piece)
    spread = float(np.dot(x, x))
    return MAD_TO_DEVIATION * median(np.abs(rest)) / spread**0.5 if spread > 0 else float("nan")


def median(values: Floats) -> float:
    """The middle value, the upper one of two; same unit as the values."""
    middle = len(values) // 2
    return float(np.partition(values, middle)[middle])


def scatter(values: Floats) -> float:
    """Standard deviation from neighbour to neighbour, whatever slow movement there is and however many outliers."""
    step = np.diff(values)
    return median(np.abs(step - median(step))) * MAD_TO_DEVIATION / 2**0.5 if len(step) else 0.0
