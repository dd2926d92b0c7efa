"""Where a cause sits, as far as one capture point can know: before it, after it, at an end, or in the capture."""

from dataclasses import dataclass

import numpy as np

from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.rule import BEFORE, ENDPOINT

INITIAL_TTL = (32, 64, 128, 255)
"""what senders begin with (common practice)"""
COUNTS_BY_ONE = 0.9
"""share of the packets whose IP identification is one more than the packet before: then it counts this stream alone"""


@dataclass(frozen=True, slots=True)
class Place:
    """A place with the words for it."""

    where: str
    phrase: str


def hops_from_sender(facts: StreamFacts) -> int:
    """Routers that most packets passed, by the time to live that senders usually begin with."""
    ttl = int(np.bincount(facts.packets.ttl).argmax())
    return next((initial - ttl for initial in INITIAL_TTL if initial >= ttl), 0)


def never_sent(facts: StreamFacts) -> np.ndarray:
    """Which runs of numbers were never sent: the sender's IP identification goes on without a gap. Shape (runs,)"""
    packets, runs = facts.packets, facts.runs
    order = facts.sequence.order
    if len(order) < 16 or not packets.ip_id.any():
        return np.zeros(len(runs.packets), np.bool_)
    steps = np.diff(packets.ip_id[order])
    following = np.diff(facts.sequence.place) == 1
    if not following.any() or (steps[following] == 1).mean() < COUNTS_BY_ONE:
        return np.zeros(len(runs.packets), np.bool_)
    over_the_gap = packets.ip_id[runs.after] - packets.ip_id[runs.before]
    return np.asarray(over_the_gap == 1)


def of_lost(facts: StreamFacts, items: np.ndarray) -> Place:
    """Where packets were lost that this capture misses; ``items`` are those of ``facts.gone``."""
    unsent = never_sent(facts)
    chosen = np.searchsorted(facts.lost_items, items[~facts.gone.late[items]])
    if len(chosen) and unsent[chosen].mean() > 0.5:
        return Place(ENDPOINT, "the sender never sent them, as its IP identification shows")
    return Place(BEFORE, "they were missing already at the capture point")
