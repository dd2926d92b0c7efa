"""Traffic: how many calls at a time, how many erlangs in the busy hour, and how many channels that takes."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

NS_PER_S = 1_000_000_000
HOUR_NS = 3600 * NS_PER_S
STEP_NS = HOUR_NS // 4
"""The busy hour begins at a quarter of an hour (common practice; ITU-T E.600 takes any 60 minutes, from memory)."""

BLOCKING = 0.01
"""Grade of service: one call in a hundred finds no channel in the busy hour (common practice)."""

T1_CHANNELS = 24
T1_CHANNELS_COMMON_SIGNALLING = 23
"""One of the 24 carries the signalling of all."""
E1_SPEECH_CHANNELS = 30
"""Of 32 time slots; one aligns the frame, one carries signalling (ITU-T G.704, from memory)."""

_MOST_CHANNELS = 1_000_000


@dataclass(frozen=True, slots=True)
class BusyHour:
    """The hour of a night that carried most."""

    begin_ns: int
    erlangs: float
    calls: float
    """that were going on at some time of it"""
    most_at_once: float
    """in the whole night"""
    most_at_once_ns: int


@dataclass(frozen=True, slots=True)
class Channels:
    """What a traffic takes at a grade of service."""

    ds0: int
    """channels of 64 kbit/s"""
    t1: int
    """lines of 24 channels"""
    t1_common_signalling: int
    """lines of 23"""
    e1: int
    """lines of 30 speech channels"""


def erlang_b(erlangs: float, channels: int) -> float:
    """Probability that a call finds all channels taken. [0 to 1]

    Parameters
    ----------
    erlangs : float
        Traffic offered. [erlang]
    channels : int
        Channels that carry it.

    References
    ----------
    A. K. Erlang (1917), the loss formula, by its recursion over the number of channels (ITU-T E.501, from memory).
    """
    blocking = 1.0
    for count in range(1, channels + 1):
        blocking = erlangs * blocking / (count + erlangs * blocking)
    return blocking


def channels_for(erlangs: float, blocking: float = BLOCKING) -> int:
    """Fewest channels at which no larger share of calls than ``blocking`` finds none free."""
    if not 0.0 < erlangs < _MOST_CHANNELS / 2:
        return 0
    found, count = 1.0, 0
    while found > blocking:
        count += 1
        found = erlangs * found / (count + erlangs * found)
    return count


def lines_for(channels: int) -> Channels:
    """How many lines so many channels are."""
    return Channels(
        ds0=channels,
        t1=math.ceil(channels / T1_CHANNELS),
        t1_common_signalling=math.ceil(channels / T1_CHANNELS_COMMON_SIGNALLING),
        e1=math.ceil(channels / E1_SPEECH_CHANNELS),
    )


def busy_hour(
    started_ns: NDArray[np.int64], ended_ns: NDArray[np.int64], weight: NDArray[np.float64]
) -> BusyHour | None:
    """The 60 minutes, beginning at a quarter of an hour, in which the calls took most time; None without calls.

    Parameters
    ----------
    started_ns, ended_ns : int64 array, shape (n,)
        Seizure and release of each call. [ns]
    weight : float64 array, shape (n,)
        How many calls each stands for: 1, or more in a sample.
    """
    if not len(started_ns):
        return None
    ended_ns = np.maximum(started_ns, ended_ns)
    first = started_ns.min() // STEP_NS * STEP_NS
    last = min(ended_ns.max(), first + 48 * HOUR_NS)
    begins = np.arange(first, max(last, first + 1), STEP_NS) - 3 * STEP_NS
    carried = [_seconds_within(started_ns, ended_ns, weight, begin, begin + HOUR_NS) for begin in begins]
    best = int(np.argmax(carried))
    begin = int(begins[best])
    within = (started_ns < begin + HOUR_NS) & (ended_ns > begin)
    most, at = most_at_once(started_ns, ended_ns, weight)
    return BusyHour(begin, float(carried[best]) / 3600.0, float(weight[within].sum()), most, at)


def most_at_once(
    started_ns: NDArray[np.int64], ended_ns: NDArray[np.int64], weight: NDArray[np.float64]
) -> tuple[float, int]:
    """Most calls at one time, and from when on. A call that ends as another begins makes room for it."""
    times = np.concatenate([ended_ns, started_ns])
    steps = np.concatenate([-weight, weight])
    order = np.argsort(times, kind="stable")
    level = np.cumsum(steps[order])
    place = int(np.argmax(level))
    return float(level[place]), int(times[order][place])


def _seconds_within(
    started_ns: NDArray[np.int64], ended_ns: NDArray[np.int64], weight: NDArray[np.float64], begin: int, end: int
) -> float:
    overlap = np.minimum(ended_ns, end) - np.maximum(started_ns, begin)
    return float((np.maximum(overlap, 0) * weight).sum()) / NS_PER_S
