"""Senders that do not send evenly: several packets at a time, then none."""

from dataclasses import dataclass
from typing import cast

import numpy as np
from numpy.typing import NDArray

from rtpaudit.findings.excursions import excursions
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.patterns import rhythm

LONGEST_BUNCH = 12
BUNCHED = 0.5
"""of the sawtooth that bunches of so many packets make, the least that counts"""
STALL_MS, FEWEST_STALLS, STALLS_PER_S, AT_ONCE_S = 20.0, 8, 0.3, 0.003
"""height and number of stops that make a habit, and what follows a stop at once (common practice)"""
EXPLAINED = 0.6
"""share of the variance that the regular bunches have to explain"""


@dataclass(frozen=True, slots=True)
class Pacing:
    """A sender's regular bunches."""

    packets: int
    """in one bunch"""
    height_ms: float
    explained: float
    """share of the variance of delay that the bunches explain [0 to 1]"""


def pacing_of(facts: StreamFacts) -> Pacing | None:
    """Regular bunches of packets, None where there are none.

    Delays in order of sequence are cut into pieces of about a second; in each, the delays folded by 2, 3, … packets
    have to explain most of their variance, and to be about a packet time apart from one packet of a bunch to the next.
    """
    if "pacing" not in facts.remembered:
        facts.remembered["pacing"] = _pacing(facts)
    return cast(Pacing | None, facts.remembered["pacing"])


def _pacing(facts: StreamFacts) -> Pacing | None:
    timed = facts.timed
    ordered = timed.row[~facts.strayed[timed.row]]
    delay = facts.delay_of_row[ordered]
    number = facts.packets.extended[ordered]
    second = max(1, round(1000 / facts.packet_time_ms))
    whole = len(delay) // second * second
    # Bunches of two alone make delays half a packet time apart in every second.
    if whole == 0 or np.median(np.ptp(delay[:whole].reshape(-1, second), axis=1)) < BUNCHED * facts.packet_time_ms:
        return None
    best: Pacing | None = None
    for size in range(2, LONGEST_BUNCH + 1):
        piece = size * max(4, round(1000 / facts.packet_time_ms / size))
        pieces = len(delay) // piece
        if pieces < 3:
            continue
        table = delay[: pieces * piece].reshape(pieces, piece)
        phase = number[: pieces * piece].reshape(pieces, piece) % size
        total = table.var(axis=1)
        means = np.stack([_mean_where(table, phase == k) for k in range(size)], axis=1)
        between = np.nanvar(means, axis=1)
        height = np.nanmax(means, axis=1) - np.nanmin(means, axis=1)
        explained = float(np.median(between / np.maximum(total, 1e-6)))
        typical = float(np.median(height))
        if (
            explained >= EXPLAINED
            and typical >= BUNCHED * facts.packet_time_ms * (size - 1)
            and (best is None or explained > best.explained + 0.05)
        ):
            best = Pacing(size, typical, explained)
    return best


def _mean_where(table: NDArray[np.float64], mask: NDArray[np.bool_]) -> NDArray[np.float64]:
    count = mask.sum(axis=1)
    return np.where(count > 0, (table * mask).sum(axis=1) / np.maximum(count, 1), np.nan)


def stalls_all_along(facts: StreamFacts) -> bool:
    """Whether a stream stops again and again, at no regular interval, and then comes at once, calm otherwise."""
    found = excursions(facts, STALL_MS)
    count = len(found.peak_ms)
    if count < FEWEST_STALLS or count < STALLS_PER_S * facts.duration_s or rhythm(found.from_s) is not None:
        return False
    outside = found.above_ms[found.event_of < 0]
    inside = np.flatnonzero((found.event_of[1:] >= 0) & (found.event_of[1:] == found.event_of[:-1])) + 1
    at_once = np.diff(facts.timed.time_s)[inside - 1] < AT_ONCE_S
    return bool(
        len(outside) > len(found.above_ms) / 2
        and np.percentile(outside, 90) < facts.packet_time_ms / 4
        and (at_once.mean() if len(inside) else 1.0) > 0.6
    )
