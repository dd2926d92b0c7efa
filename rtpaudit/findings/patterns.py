"""Patterns in times: what comes at regular intervals, what falls together, where a level steps for good.

Tests of our own; each says how much of it chance would make.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
Mask = NDArray[np.bool_]

FEWEST_EVENTS = 4
UNEVENNESS = (0.012, 0.02, 0.035, 0.06)
"""rms distance from the regular grid, over the period, for 4, 5, 6 and more events; chance makes 0.29"""
COVERAGE = 0.7
"""share of the places on the grid that have an event"""


@dataclass(frozen=True, slots=True)
class Rhythm:
    """Events at regular intervals."""

    period_s: float
    events: int
    unevenness: float
    """rms distance from the grid over the period"""


def events_of(from_s: Floats, to_s: Floats, apart_s: float) -> Indices:
    """Event that each item belongs to, items in order of time: a new one begins after a pause over ``apart_s``."""
    if not len(from_s):
        return np.empty(0, np.int64)
    reach = np.maximum.accumulate(to_s)
    return np.concatenate([[0], np.cumsum(from_s[1:] - reach[:-1] > apart_s)])


def rhythm(at_s: Floats, shortest_s: float = 0.0) -> Rhythm | None:
    """The period of events, None where they have none.

    Parameters
    ----------
    at_s : float array, shape (events,)
        In order. [s]
    shortest_s : float
        No period below it. [s]

    Notes
    -----
    Every interval between neighbours, and its half and third where events were missed, is tried as a period and
    fitted by least squares.
    """
    n = len(at_s)
    if n < FEWEST_EVENTS:
        return None
    allowed = UNEVENNESS[min(n - FEWEST_EVENTS, len(UNEVENNESS) - 1)]
    best: Rhythm | None = None
    for period in _candidates(at_s):
        found = _fit(at_s, period)
        if found is None or found.period_s < shortest_s or found.unevenness > allowed:
            continue
        if best is None or found.unevenness < best.unevenness:
            best = found
    return best


def _candidates(at_s: Floats) -> Floats:
    steps = np.diff(at_s)
    steps = steps[steps > 0]
    if not len(steps):
        return steps
    usual = np.quantile(steps, [0.25, 0.5, 0.75])
    mean = (at_s[-1] - at_s[0]) / (len(at_s) - 1)
    return np.unique(np.concatenate([usual, usual / 2, usual / 3, [mean]]))


def _fit(at_s: Floats, period: float) -> Rhythm | None:
    """Least-squares grid of about this period through the events."""
    for _ in range(4):
        place = np.concatenate([[0.0], np.cumsum(np.rint(np.diff(at_s) / period))])
        if (np.diff(place) < 1).any():
            return None
        period, begin = np.polyfit(place, at_s, 1).tolist()
        if period <= 0:
            return None
    if len(at_s) < COVERAGE * (place[-1] + 1):
        return None
    rest = at_s - (begin + period * place)
    return Rhythm(period, len(at_s), float(np.sqrt(np.mean(rest * rest))) / period)


def falling_together(one: tuple[Floats, Floats], other: tuple[Floats, Floats], slack_s: float) -> Mask:
    """Which intervals (begins, ends) of ``one`` overlap any of ``other``, give or take a slack; both in order."""
    begin, end = other
    if not len(begin):
        return np.zeros(len(one[0]), np.bool_)
    reach = np.maximum.accumulate(end)
    # The last interval that begins before this one ends; it, or an earlier one, may reach into it.
    last = np.searchsorted(begin, one[1] + slack_s, "right") - 1
    return np.asarray((last >= 0) & (reach[np.maximum(last, 0)] >= one[0] - slack_s))


def by_chance(
    one: tuple[Floats, Floats], other: tuple[Floats, Floats], slack_s: float, within_s: tuple[float, float]
) -> float:
    """Share of ``one`` that would overlap ``other`` if they had nothing to do with each other. [0 to 1]"""
    begin, end = other
    span = within_s[1] - within_s[0]
    if span <= 0 or not len(begin) or not len(one[0]):
        return 0.0
    length = float(np.mean(one[1] - one[0]))
    group = events_of(begin, end, 2 * slack_s + length)
    first = np.searchsorted(group, np.arange(group[-1] + 1))
    covered = np.maximum.reduceat(end, first) - begin[first] + 2 * slack_s + length
    return float(min(1.0, covered.sum() / span))


@dataclass(frozen=True, slots=True)
class Step:
    """A level that changes from one element to the next and stays changed."""

    at: int
    """first element of the new level"""
    height: float


def lasting_steps(level: Floats, least: float, beside: int, most: int = 32) -> list[Step]:
    """Steps of at least ``least`` between neighbours that ``beside`` elements on either side bear out.

    Both the step itself and the difference of the medians beside it have to be that high; steps that one element
    makes, or that come back, are none.
    """
    n = len(level)
    if n < 2 * beside:
        return []
    jump = np.diff(level)
    places = np.flatnonzero(np.abs(jump) >= least) + 1
    places = places[(places >= min(3, beside)) & (places <= n - min(3, beside))]
    found: list[Step] = []
    for at in places[:4096].tolist():
        before, after = level[max(0, at - beside) : at], level[at : at + beside]
        height = float(np.median(after) - np.median(before))
        if abs(height) < least or height * jump[at - 1] <= 0 or abs(height - jump[at - 1]) > 0.5 * abs(height):
            continue
        if found and at - found[-1].at < beside // 2:
            continue
        found.append(Step(at, height))
        if len(found) == most:
            break
    return found
