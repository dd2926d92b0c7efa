"""Rules about the way that packets take: their order, copies, marking, and the route."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from rtpaudit.findings.case import Case
from rtpaudit.findings.excursions import excursions
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.place import hops_from_sender
from rtpaudit.findings.rule import BEFORE, COMMON_PRACTICE, ENDPOINT, UNKNOWN, Evidence, rule
from rtpaudit.findings.share import claim
from rtpaudit.findings.words import many, ms, number, pct, times
from rtpaudit.units import NS_PER_MS, percent

VOICE_MARKINGS = frozenset({46, 44, 40, 48, 56})
"""EF, VOICE-ADMIT (RFC 5865), and the class selectors 5 to 7 that old gear gives to voice"""
NAMES = {0: "best effort (0)", 46: "EF (46)", 44: "VOICE-ADMIT (44)", 34: "AF41 (34)", 26: "AF31 (26)", 24: "CS3 (24)"}
DOUBLED_PCT = 40.0
"""share of copies from which a mirror that sees frames twice is likelier than a network that doubles them"""
LASTING_PACKETS = 25
PASSAGE_MS = 50.0
LATE_PCT = 0.1
"""overtaken packets that come too late, from which they count however few they are"""


@rule(
    "reordering", group="network", limit=1.0, unit="%", basis=COMMON_PRACTICE,
    means="Packets overtook each other, as several ways, several queues or a parallel processor on the way make "
    "them do.",
    measured_as="share of packets whose number is below the highest seen before (RFC 4737), passages of high delay "
    "left out; fewer count where they come too late for playout",
    check_next="Look for load sharing packet by packet, bonded links, and devices that process packets in parallel.",
    severity="by what late packets take from the rating; at least a concern",
)  # fmt: skip
def reordering(case: Case, limit: float) -> Iterator[Evidence]:
    """Packets that overtake each other."""
    for facts in case.streams:
        if not facts.assessed.figures.packets_reordered:
            continue
        single = _overtaken_singly(facts)
        share = percent(int(single.sum()), facts.sequence.received)
        late_share = percent(int(single[facts.late_rows].sum()), facts.sequence.expected)
        if not share >= limit and not late_share >= LATE_PCT:
            continue
        overtaken = facts.late_items[single[facts.late_rows]]
        alone = _calm_but_for_overtaken(facts)
        late = overtaken if alone else overtaken[:0]
        heard = (
            f"{many(len(late), 'packet')} of them too late for playout"
            if len(late)
            else "none of them too late for playout"
        )
        yield Evidence(
            measured=share,
            says=f"{pct(share)} of the packets to the {case.listener(facts)} were overtaken by later ones, {heard}"
            f"{'' if alone else ', as their delays vary far more than a packet time'}.",
            stream=facts.id,
            where=BEFORE,
            confidence_pct=95.0 if alone else 60.0,
            claims=[claim(facts, late, 0.95)],
            at_least="concern" if alone and share >= limit else "remark",
            at_most="fault" if alone else "remark",
        )


@rule(
    "duplicates", group="network", limit=1.0, unit="%", basis=COMMON_PRACTICE,
    means="The network delivered packets more than once. The listener hears nothing of it, but a loop, a bonded "
    "link or a repeated radio frame wastes the way's capacity.",
    measured_as="share of the captured packets that are copies with the same number, timestamp and payload",
    check_next="Look for a switching loop, a bonded link or a failing radio on this way.",
    severity="a concern",
)  # fmt: skip
def duplicates(case: Case, limit: float) -> Iterator[Evidence]:
    """Copies that the network made."""
    for facts in case.streams:
        share = percent(facts.assessed.figures.packets_duplicated, facts.assessed.figures.packets_captured)
        if not share >= limit or mirrored(facts):
            continue
        lag = copies_of(facts).lag_ms
        yield Evidence(
            measured=share,
            says=f"{pct(share)} of the packets to the {case.listener(facts)} came more than once, {ms(lag)} later in "
            "the middle; nobody hears it, but something on the way doubles them.",
            stream=facts.id,
            where=BEFORE,
            confidence_pct=80.0,
            at_least="concern",
            at_most="concern",
        )


@rule(
    "marking-absent", group="network", limit=0, unit="DSCP", basis="RFC 4594, telephony class",
    means="Voice packets bear no marking, so that busy links queue them behind everything else, while other voice "
    "here is marked.",
    measured_as="DSCP of most packets, where the other direction or other streams of the same sender bear one",
    check_next="Find the first router or switch at which the marking is gone: the endpoint's setting, or a port "
    "that does not trust it.",
    severity="a concern where the unmarked packets passed a router, else a remark",
)  # fmt: skip
def marking_absent(case: Case, limit: float) -> Iterator[Evidence]:
    """Voice without a marking among voice with one."""
    for facts in case.streams:
        if facts.assessed.figures.dscp > limit or _changes(facts):
            continue
        opposite = [one for one in case.others_of(facts) if one.assessed.figures.dscp in VOICE_MARKINGS]
        marked = opposite or case.elsewhere_from(facts)
        marked = [one for one in marked if one.assessed.figures.dscp in VOICE_MARKINGS]
        if not marked:
            continue
        routed = hops_from_sender(facts) > 0 or any(hops_from_sender(one) > 0 for one in marked)
        yield Evidence(
            measured=facts.assessed.figures.dscp,
            says=f"Packets to the {case.listener(facts)} bear no marking while "
            f"{'those of the other direction' if opposite else 'other streams of the same sender'} bear "
            f"{_name(marked[0].assessed.figures.dscp)}: on a busy link they wait behind everything else.",
            stream=facts.id,
            where=BEFORE if hops_from_sender(facts) > 0 else ENDPOINT,
            confidence_pct=80.0 if opposite else 60.0,
            at_least="concern" if routed and opposite else "remark",
            at_most="concern",
        )


@rule(
    "marking-changed", group="network", limit=1, unit="changes", basis="RFC 4594, telephony class",
    means="The marking of a stream changed while it ran, so that from then on another class of service carried it.",
    measured_as="changes of DSCP that last for 25 packets and more",
    check_next="Look for what changed at that time: another route, a policer that marks down, a re-invited endpoint.",
    severity="a concern",
)  # fmt: skip
def marking_changed(case: Case, limit: float) -> Iterator[Evidence]:
    """A marking that changes in mid-stream."""
    for facts in case.streams:
        changes = _changes(facts)
        if not changes or len(changes) < limit:
            continue
        first = changes[0]
        at = case.seconds(int(facts.packets.time_ns[first.row]))
        more = "" if len(changes) == 1 else f" and {times(len(changes) - 1)} more"
        yield Evidence(
            measured=len(changes),
            says=f"The marking of packets to the {case.listener(facts)} changed from {_name(first.before)} to "
            f"{_name(first.after)} at {number(at)} s{more}: another class of service carried the rest of the call.",
            stream=facts.id,
            where=BEFORE if hops_from_sender(facts) > 0 else UNKNOWN,
            confidence_pct=95.0,
            from_s=at,
            to_s=case.seconds(facts.assessed.ended_ns),
            at_least="concern",
            at_most="concern",
        )


@rule(
    "route-change", group="network", limit=1, unit="changes", basis=COMMON_PRACTICE,
    means="Packets took another way from some moment on: the number of routers passed changed, and delay with it.",
    measured_as="changes of the time to live, or hop limit, that last for 25 packets and more, with the step of the "
    "delay",
    check_next="Ask for routing changes, failovers and link states at that time.",
    severity="by what late packets take from the rating; at least a concern where delay steps by 2 ms or packets "
    "are lost",
)  # fmt: skip
def route_change(case: Case, limit: float) -> Iterator[Evidence]:
    """Another way from some moment on."""
    for facts in case.streams:
        changes = lasting_changes(facts, facts.packets.ttl)
        if not changes or len(changes) < limit:
            continue
        steps = [_delay_step(facts, one.row) for one in changes]
        first, step = changes[0], max(steps, key=abs)
        at = case.seconds(int(facts.packets.time_ns[first.row]))
        late = _late_after(facts, [one.row for one in changes])
        grew = f", delay {'grew' if step > 0 else 'fell'} by {ms(abs(step))}" if abs(step) >= 1 else ""
        yield Evidence(
            measured=len(changes),
            says=f"At {number(at)} s packets to the {case.listener(facts)} took another way: they passed "
            f"{many(abs(first.before - first.after), 'router')} "
            f"{'fewer' if first.after > first.before else 'more'}{grew}"
            f"{f', and {len(late)} packets came too late for playout' if len(late) else ''}.",
            stream=facts.id,
            where=BEFORE,
            confidence_pct=95.0 if abs(step) >= 2 else 80.0,
            from_s=at,
            to_s=case.seconds(facts.assessed.ended_ns),
            claims=[claim(facts, late, 0.9)],
            at_least="concern",
        )


@dataclass(frozen=True, slots=True)
class Change:
    """A value of the header that changes and stays."""

    row: int
    """first packet with the new value"""
    before: int
    after: int


def lasting_changes(facts: StreamFacts, values: np.ndarray) -> list[Change]:
    """Changes of a header value that last for ``LASTING_PACKETS`` on either side; copies left out."""
    rows = np.flatnonzero(~facts.packets.duplicate)
    column = values[rows].astype(np.int64)
    edges = np.concatenate([[0], np.flatnonzero(np.diff(column)) + 1, [len(column)]])
    if len(edges) == 2:
        return []
    first = edges[:-1][np.diff(edges) >= LASTING_PACKETS]
    held = column[first]
    changed = np.flatnonzero(np.diff(held)) + 1
    return [Change(int(rows[first[k]]), int(held[k - 1]), int(held[k])) for k in changed[:64].tolist()]


@dataclass(frozen=True, slots=True)
class Copies:
    """What the copies of a stream's packets look like."""

    lag_ms: float
    """median time between a packet and its copy"""
    same_identification: float
    """share of copies with the IP identification of their packet [0 to 1]; 1 where there are none to compare"""


def copies_of(facts: StreamFacts) -> Copies:
    """Lag of copies behind their packets."""
    packets = facts.packets
    copies = np.flatnonzero(packets.duplicate)
    number = packets.segment.astype(np.int64) << 48 | packets.extended
    order = facts.sequence.order
    at = order[np.clip(np.searchsorted(number[order], number[copies]), 0, len(order) - 1)]
    lag = (packets.time_ns[copies] - packets.time_ns[at]) / NS_PER_MS
    same = packets.ip_id[copies] == packets.ip_id[at]
    return Copies(float(np.median(np.abs(lag))) if len(lag) else float("nan"), float(same.mean()) if len(same) else 1.0)


def mirrored(facts: StreamFacts) -> bool:
    """Whether a capture that sees each frame twice made the copies: most packets, at once, the same datagram."""
    share = percent(facts.assessed.figures.packets_duplicated, facts.assessed.figures.packets_captured)
    if not share >= DOUBLED_PCT:
        return False
    copies = copies_of(facts)
    return copies.lag_ms < 5.0 and copies.same_identification > 0.9


def _changes(facts: StreamFacts) -> list[Change]:
    """Changes of the marking, those of events left out, which some gear marks otherwise."""
    return lasting_changes(facts, facts.packets.dscp)


def _name(dscp: int) -> str:
    return NAMES.get(dscp, f"DSCP {dscp}")


def _overtaken_singly(facts: StreamFacts) -> np.ndarray:
    """Overtaken packets outside passages in which delay was high for many."""
    single = facts.overtaken.copy()
    found = excursions(facts, PASSAGE_MS)
    single[facts.timed.row[found.event_of >= 0]] = False
    return single


def _calm_but_for_overtaken(facts: StreamFacts) -> bool:
    """Whether the packets that were not overtaken came evenly: then order is the matter, and not delay variation."""
    delay = facts.timed.delay_ms[~facts.overtaken[facts.timed.row]]
    if len(delay) < 10:
        return False
    low, high = np.percentile(delay, [5, 90])
    return bool(high - low < facts.packet_time_ms)


def _delay_step(facts: StreamFacts, row: int) -> float:
    """Step of the delay at a packet, by medians of two seconds on either side. [ms]"""
    timed = facts.timed
    at = int(np.searchsorted(timed.row, row))
    size = max(10, round(2000 / facts.packet_time_ms))
    before, after = timed.delay_ms[max(0, at - size) : at], timed.delay_ms[at : at + size]
    return float(np.median(after) - np.median(before)) if len(before) and len(after) else 0.0


def _late_after(facts: StreamFacts, rows: list[int]) -> np.ndarray:
    """Late items within the talkspurt in which a change fell, from the change on."""
    return np.unique(np.concatenate([facts.late_within_talkspurt(row) for row in rows]))
