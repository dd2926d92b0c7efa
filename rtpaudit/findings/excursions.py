"""Moments in which the delay of a stream leaves its usual course."""

from dataclasses import dataclass
from typing import cast

import numpy as np
from numpy.typing import NDArray

from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.patterns import lasting_steps
from rtpaudit.units import MS_PER_S

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

BASE_BLOCK_S = 1.0
BASE_BLOCKS = 7
"""blocks whose median is the base line: slower changes are no excursions"""
OVER_SPREAD = 5.0
"""how far beyond the usual spread a packet has to be"""
APART_S = 0.2
FEWEST_PACKETS = 10
LEAST_STEP_MS = 30.0
LASTING_S = 3.0


@dataclass(frozen=True, slots=True)
class Excursions:
    """Passages of high delay. Arrays of shape (events,)."""

    from_s: Floats
    to_s: Floats
    peak_ms: Floats
    event_of: Indices
    """event that each timed packet lies in, -1 for none. Shape (timed,)"""
    above_ms: Floats
    """delay of each timed packet above the base line. Shape (timed,)"""


def is_calm(facts: StreamFacts, least_ms: float) -> bool:
    """Whether no packet is delayed so much that it could be in an excursion of that height: most streams are so."""
    return not facts.timed.delay_ms.max(initial=0.0) >= least_ms


def excursions(facts: StreamFacts, least_ms: float) -> Excursions:
    """Passages that go ``least_ms`` or more, and well beyond the usual spread, above a slow base line.

    Single overtaken packets do not count: what one lost against the others is no matter of the way's delay.
    """
    timed = facts.timed
    ordered = np.flatnonzero(~facts.strayed[timed.row])
    event_of = np.full(len(timed.row), -1)
    if len(ordered) < FEWEST_PACKETS:
        return _none(event_of, np.zeros(len(timed.row)))
    at = timed.time_s[ordered]
    if "above" not in facts.remembered:
        level = timed.delay_ms[ordered]
        step = _lasting(level, facts.packet_time_ms)
        facts.remembered["above"] = timed.delay_ms - np.interp(timed.time_s, at, step + _base(at, level - step))
    above_ms = cast(Floats, facts.remembered["above"])
    above = above_ms[ordered]
    high = max(least_ms, OVER_SPREAD * float(np.percentile(above, 75)))
    rows = np.flatnonzero(above > high / 2)
    if not len(rows) or above.max() <= high:
        return _none(event_of, above_ms)
    event = np.concatenate([[0], np.cumsum(at[rows[1:]] - at[rows[:-1]] > APART_S)])
    first = np.searchsorted(event, np.arange(event[-1] + 1))
    peak = np.maximum.reduceat(above[rows], first)
    sound = peak > high
    number = np.where(sound, np.cumsum(sound) - 1, -1)
    event_of[ordered[rows]] = number[event]
    last = np.append(first[1:], len(rows)) - 1
    return Excursions(at[rows[first[sound]]], at[rows[last[sound]]], peak[sound], event_of, above_ms)


def _none(event_of: Indices, above_ms: Floats) -> Excursions:
    nothing = np.empty(0)
    return Excursions(nothing, nothing, nothing, event_of, above_ms)


def _lasting(level_ms: Floats, packet_time_ms: float) -> Floats:
    """What steps that last have added so far: another route, or a capture clock that was set, is no excursion."""
    added = np.zeros(len(level_ms))
    for one in lasting_steps(level_ms, LEAST_STEP_MS, round(LASTING_S * MS_PER_S / packet_time_ms)):
        added[one.at :] += one.height
    return added


def _base(at_s: Floats, delay_ms: Floats) -> Floats:
    """Slow base line under the delays: the lower fifth of each second, its median over seven seconds."""
    block = ((at_s - at_s[0]) / BASE_BLOCK_S).astype(np.int64)
    order = np.lexsort((delay_ms, block))
    used, first, count = np.unique(block[order], return_index=True, return_counts=True)
    low = delay_ms[order][first + count // 5]
    half = BASE_BLOCKS // 2
    padded = np.concatenate([np.full(half, low[0]), low, np.full(half, low[-1])])
    base = np.median(np.lib.stride_tricks.sliding_window_view(padded, BASE_BLOCKS), axis=1)
    return np.asarray(base[np.searchsorted(used, block)])
