"""How the losses of one stream lie: in runs and clusters, evenly spaced, at the top of a queue."""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.units import NS_PER_MS, NS_PER_S

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

FARTHEST = 25
"""packets between losses: a limit less than 4 % below the rate of the stream would be set by nobody"""
OUTAGE_MS = 1000.0
"""from here on a gap is an outage and no burst"""
EVEN = 0.15
"""variance of the spacing over that of random loss, below which losses are evenly spaced"""


def short_runs(facts: StreamFacts) -> NDArray[np.bool_]:
    """Runs that are no outage."""
    return np.asarray(facts.gone.packets[facts.lost_items] * facts.packet_time_ms < OUTAGE_MS)


def in_time(facts: StreamFacts, items: Indices) -> Indices:
    """Items in order of time, which differs from that of the stream where packets overtake each other."""
    return np.asarray(items[np.argsort(facts.gone.from_ns[items], kind="stable")])


def times_of(facts: StreamFacts, items: Indices, case: Case | None = None) -> tuple[Floats, Floats]:
    """Begin and end of items, in seconds of the stream, or of the call where it is given; in order of time."""
    origin = facts.assessed.started_ns if case is None else case.call.started_ns
    begin, end = ((column[items] - origin) / NS_PER_S for column in (facts.gone.from_ns, facts.gone.to_ns))
    order = np.argsort(begin, kind="stable")
    return begin[order], end[order]


def span_of(case: Case, facts: StreamFacts, items: Indices) -> tuple[float, float]:
    """Where items begin and end within the call. [s]"""
    gone = facts.gone
    end = gone.to_ns[items] + round(facts.packet_time_ms * NS_PER_MS)
    return case.seconds(int(gone.from_ns[items].min())), case.seconds(int(end.max()))


def clustered(facts: StreamFacts, items: Indices) -> bool:
    """Whether losses make fewer runs, or more uneven counts, than random loss of the same rate (three deviations)."""
    packets = facts.gone.packets[items]
    n, lost = facts.sequence.expected, int(packets.sum())
    if lost < 2 or lost == n:
        return lost == n
    runs = len(items)
    expected = lost * (n - lost + 1) / n
    deviation = lost * (n - lost) / n**1.5
    if (expected - runs) / max(deviation, 0.3) > 3.0:
        return True
    size = 25
    windows = max(n // size, 1)
    counts = np.bincount(np.minimum(facts.gone.place[items] // size, windows - 1), packets, windows)
    mean = lost / windows
    excess = float(counts.var() / mean - (1.0 - lost / n))
    return bool(excess > 3.0 * (2.0 / windows) ** 0.5 + 0.5)


def bursts_among(facts: StreamFacts, items: Indices, limit: float) -> tuple[Indices, float]:
    """Items that belong to bursts over the limit, and the longest. [ms]"""
    gone, step = facts.gone, facts.packet_time_ms
    begin, packets = gone.place[items], gone.packets[items]
    end = begin + packets
    event = np.concatenate([[0], np.cumsum(begin[1:] - end[:-1] > 4)])
    first = np.searchsorted(event, np.arange(event[-1] + 1))
    lost = np.add.reduceat(packets, first)
    length = np.append(end[first[1:] - 1], end[-1]) - begin[first]
    longest_run = np.maximum.reduceat(packets, first)
    dense = (lost >= 0.3 * length) & (lost >= 3) & (length * step < 2 * OUTAGE_MS)
    measure = np.where(longest_run * step > limit, longest_run * step, np.where(dense, length * step, 0.0))
    over = measure > limit
    # Dense passages alone are a pattern only where they hold most of what is lost.
    if not (longest_run[over] * step > limit).any() and lost[over].sum() < 0.5 * lost.sum():
        return items[:0], 0.0
    chosen = over[event] | ((packets >= 2) & over.any())
    return items[chosen], float(measure.max())


def spacing_of(facts: StreamFacts, items: Indices) -> tuple[float, float]:
    """Variance of the spacing of losses over that of random loss, and its median [packets]; NaN for too few.

    Spacings far over the usual are left out: in a pause the bucket of a policer fills.
    """
    nothing = (float("nan"), float("nan"))
    packets = facts.gone.packets[items]
    if len(items) < 8 or float((packets == 1).mean()) < 0.9:
        return nothing
    spacing = np.diff(facts.gone.place[items]).astype(np.float64)
    usual = float(np.median(spacing))
    spacing = spacing[spacing <= 3 * usual]
    mean = float(spacing.mean())
    if mean < 2.0:
        return nothing
    return float(spacing.var() / (mean * (mean - 1.0))), usual


def is_by_rate(facts: StreamFacts, items: Indices) -> bool:
    """Whether losses are evenly spaced and as close as a rate limit makes them."""
    evenness, spacing = spacing_of(facts, items)
    return bool(evenness <= EVEN and spacing <= FARTHEST)


def late_in_queue(facts: StreamFacts, chosen: Indices) -> Indices:
    """Late items within 2 s of the losses that a full queue made."""
    late = facts.late_items
    if not len(late) or not len(chosen):
        return late
    loss_s = np.sort(facts.gone.from_ns[chosen]) / NS_PER_S
    late_s = facts.gone.from_ns[late] / NS_PER_S
    place_of = (
        np.clip(np.searchsorted(loss_s, late_s), 1, len(loss_s) - 1) if len(loss_s) > 1 else np.zeros(len(late), int)
    )
    nearest = np.minimum(np.abs(loss_s[place_of] - late_s), np.abs(loss_s[np.maximum(place_of - 1, 0)] - late_s))
    return np.asarray(late[nearest <= 2.0])
