"""Rules about packets that the network lost: at random, in bursts, at intervals, at a rate, under load, both ways."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from rtpaudit.findings import place
from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.far_end import lost_after
from rtpaudit.findings.losses import (
    EVEN,
    FARTHEST,
    OUTAGE_MS,
    bursts_among,
    clustered,
    in_time,
    is_by_rate,
    late_in_queue,
    short_runs,
    spacing_of,
    span_of,
    times_of,
)
from rtpaudit.findings.patterns import by_chance, events_of, falling_together, rhythm
from rtpaudit.findings.rule import COMMON_PRACTICE, UNKNOWN, Evidence, rule
from rtpaudit.findings.share import claim
from rtpaudit.findings.words import many, ms, number, pct, times
from rtpaudit.units import percent

AFTER_PCT = 0.5
"""loss behind the capture point that counts: reports come late and round (common practice)"""
SHORTEST_PERIOD_S = 0.45
EVENT_APART_S = 0.25
"""losses closer than this belong to one event"""
TOGETHER_S = 0.1
"""by which gaps of two directions may miss each other and still be one"""
MOST_CHANCE = 0.03
"""that so many gaps fall together though they have nothing to do with each other"""


@rule(
    "random-loss", group="network", tier=3, limit=0.1, unit="%", basis="ITU-T Y.1541, loss ratio of classes 0 to 4",
    means="Packets were lost one by one without any pattern, as a bad line, a radio link or a full queue with random "
    "early drop does.",
    measured_as="share of the expected packets that are missing and that no pattern explains, once runs of missing "
    "numbers are no longer than chance makes them",
    check_next="Look at the error counters of the links and radio hops on this way, then at duplex settings.",
)  # fmt: skip
def random_loss(case: Case, limit: float) -> Iterator[Evidence]:
    """Loss without a pattern."""
    yield from lost_after(case, AFTER_PCT, in_bursts=False)
    for facts in case.streams:
        items, left = facts.lost_items, case.left(facts)
        chosen = items[left[items] > 0.5]
        lost = facts.gone.packets[chosen] * left[chosen]
        share = percent(float(lost.sum()), facts.sequence.expected)
        if not len(chosen) or not share >= limit:
            continue
        where = place.of_lost(facts, chosen)
        longest = int(facts.gone.packets[chosen].max())
        begin_s, end_s = span_of(case, facts, chosen)
        yield Evidence(
            measured=share,
            says=f"{pct(share)} of the packets to the {case.listener(facts)} were lost one by one at random "
            f"({many(len(chosen), 'gap')} of {many(longest, 'packet')} at most), heard as short dropouts and "
            f"roughness; {where.phrase}.",
            stream=facts.id,
            where=where.where,
            confidence_pct=min(95.0, 60.0 + 5.0 * len(chosen)),
            claims=[claim(facts, chosen)],
            from_s=begin_s,
            to_s=end_s,
        )


@rule(
    "loss-burst", group="network", tier=2, limit=60.0, unit="ms", basis="ITU-T G.711 Appendix I, concealment fades "
    "to silence",
    means="Packets were lost in runs too long for concealment, which has faded to silence by the limit.",
    measured_as="longest run of missing numbers times packet time, or longest passage that lost a third and more of "
    "its packets, where there are more of them than chance makes",
    check_next="Look for what is congested, or goes away for a moment, at these times: uplinks, radio hops, "
    "spanning tree, CPU.",
)  # fmt: skip
def loss_burst(case: Case, limit: float) -> Iterator[Evidence]:
    """Runs of loss beyond what concealment bridges."""
    yield from lost_after(case, AFTER_PCT, in_bursts=True)
    for facts in case.streams:
        items = facts.lost_items
        items = items[case.left(facts)[items] > 0.5]
        if len(items) == 0 or not clustered(facts, items):
            continue
        chosen, longest = bursts_among(facts, items, limit)
        if not len(chosen):
            continue
        where = place.of_lost(facts, chosen)
        bursts = 1 + int(events_of(*times_of(facts, chosen), EVENT_APART_S)[-1])
        lost = int(facts.gone.packets[chosen].sum())
        begin_s, end_s = span_of(case, facts, chosen)
        yield Evidence(
            measured=longest,
            says=f"{many(lost, 'packet')} to the {case.listener(facts)} were lost in {many(bursts, 'burst')} of up to "
            f"{ms(longest)}, longer than concealment bridges, so that syllables or words were missing; {where.phrase}.",
            stream=facts.id,
            where=where.where,
            confidence_pct=min(95.0, 75.0 + 5.0 * bursts),
            claims=[claim(facts, chosen, 0.9)],
            at_least="concern",
            from_s=begin_s,
            to_s=end_s,
        )


@rule(
    "outage", group="network", limit=OUTAGE_MS, unit="ms", basis=COMMON_PRACTICE,
    means="For a second or more no packet of a stream arrived though the sender went on sending.",
    measured_as="longest run of missing numbers times packet time",
    check_next="Look for a link, tunnel or radio cell that went down and came back, or a failover, at this very time.",
    severity="a fault",
)  # fmt: skip
def outage(case: Case, limit: float) -> Iterator[Evidence]:
    """A gap of a second or more."""
    for facts in case.streams:
        items = facts.lost_items
        length = facts.gone.packets[items] * facts.packet_time_ms
        chosen = items[(length >= limit) & (case.left(facts)[items] > 0.5)]
        if not len(chosen):
            continue
        longest = float(length.max())
        where = place.of_lost(facts, chosen)
        begin_s, end_s = span_of(case, facts, chosen)
        yield Evidence(
            measured=longest,
            says=f"The stream to the {case.listener(facts)} broke off {times(len(chosen))}, for {ms(longest)} at the "
            f"longest, while its sender went on counting packets: the {case.listener(facts)} heard nothing; "
            f"{where.phrase}.",
            stream=facts.id,
            where=where.where,
            confidence_pct=95.0,
            claims=[claim(facts, chosen, 0.95)],
            at_least="fault",
            from_s=begin_s,
            to_s=end_s,
        )


@rule(
    "periodic-loss", group="network", limit=4, unit="events", basis=COMMON_PRACTICE,
    means="Loss came at regular intervals, so something that runs by a clock takes the packets: a scan, a poll, a "
    "backup, a routing timer, a radio that looks for neighbours.",
    measured_as="number of loss events that lie on a regular grid of one second and more, with little rest beside it",
    check_next="Look for what runs on this way with this very period.",
)  # fmt: skip
def periodic_loss(case: Case, limit: float) -> Iterator[Evidence]:
    """Loss by the clock."""
    for facts in case.streams:
        items = facts.lost_items
        items = items[case.left(facts)[items] > 0.5]
        for least in (1, 3):
            heavy = items[facts.gone.packets[items] >= least]
            if len(heavy) < limit:
                continue
            begin, end = times_of(facts, heavy)
            event = events_of(begin, end, EVENT_APART_S)
            first = np.searchsorted(event, np.arange(event[-1] + 1))
            found = rhythm(begin[first], SHORTEST_PERIOD_S)
            if found is None or found.events < limit or (least == 1 and is_by_rate(facts, heavy)):
                continue
            lost = int(facts.gone.packets[heavy].sum())
            where = place.of_lost(facts, heavy)
            begin_s, end_s = span_of(case, facts, heavy)
            yield Evidence(
                measured=found.events,
                says=f"{many(lost, 'packet')} to the {case.listener(facts)} were lost at regular intervals of "
                f"{number(found.period_s)} s ({found.events} times), heard as a dropout that comes back by the clock; "
                f"{where.phrase}.",
                stream=facts.id,
                where=where.where,
                confidence_pct=min(95.0, 70.0 + 4.0 * found.events),
                claims=[claim(facts, heavy, min(0.95, 0.7 + 0.04 * found.events))],
                at_least="concern",
                from_s=begin_s,
                to_s=end_s,
            )
            break


@rule(
    "policing", group="network", limit=EVEN, unit="", basis=COMMON_PRACTICE,
    means="Single packets were lost evenly spaced, as a policer does that lets through a rate a little below that "
    "of the stream; nothing queues, so delay does not grow.",
    measured_as="variance of the spacing between lost packets over that of random loss: 1 for random, 0 for one "
    "packet in so many",
    check_next="Compare the policer's or shaper's rate for this class with the stream's rate, all headers counted.",
)  # fmt: skip
def policing(case: Case, limit: float) -> Iterator[Evidence]:
    """Loss at a rate."""
    for facts in case.streams:
        items = facts.lost_items
        items = items[case.left(facts)[items] > 0.5]
        evenness, spacing = spacing_of(facts, items)
        if not evenness <= limit or spacing > FARTHEST:
            continue
        share = percent(float(facts.gone.packets[items].sum()), facts.sequence.expected)
        where = place.of_lost(facts, items)
        begin_s, end_s = span_of(case, facts, items)
        yield Evidence(
            measured=evenness,
            says=f"{pct(share)} of the packets to the {case.listener(facts)} were lost singly and evenly, about every "
            f"{number(spacing)}th packet, as a rate limit a little below the stream's rate does; {where.phrase}.",
            stream=facts.id,
            where=where.where,
            confidence_pct=min(95.0, 60.0 + 2.0 * len(items)),
            claims=[claim(facts, items, min(0.95, 0.6 + 0.02 * len(items)))],
            at_least="concern",
            from_s=begin_s,
            to_s=end_s,
        )


@rule(
    "load", group="network", limit=20.0, unit="ms", basis=COMMON_PRACTICE,
    means="Delay grew before packets were lost: a queue filled up and overflowed, so a link carries more than it can.",
    measured_as="delay beyond the smallest, median over the packets just before each loss, where most losses come "
    "at the top of a queue that is not always full",
    check_next="Look at the use of the links on this way at these times, at their queues, and at whether voice has "
    "priority.",
)  # fmt: skip
def load(case: Case, limit: float) -> Iterator[Evidence]:
    """Loss after growing delay."""
    for facts in case.streams:
        items = facts.lost_items
        before = facts.delay_of_row[facts.runs.before]
        known = ~np.isnan(before) & (facts.gone.packets[items] * facts.packet_time_ms < OUTAGE_MS)
        if known.sum() < 3 or len(facts.timed.row) < 50:
            continue
        full = 0.6 * facts.calm_delay_ms(99)
        packets = facts.gone.packets[items] * known
        at_top = known & (before >= full)
        share = float(packets[at_top].sum()) / float(packets.sum())
        usual = float((facts.timed.delay_ms >= full).mean())
        typical = float(np.median(before[at_top])) if at_top.any() else 0.0
        if share < 0.7 or share - usual < 0.3 or typical < limit or at_top.sum() < 3:
            continue
        chosen = items[at_top]
        late = late_in_queue(facts, chosen)
        where = place.of_lost(facts, chosen)
        begin_s, end_s = span_of(case, facts, chosen)
        yield Evidence(
            measured=typical,
            says=f"Before {many(int(packets[at_top].sum()), 'packet')} to the {case.listener(facts)} were lost, "
            f"delay had grown by {ms(typical)}: a queue filled and overflowed, heard as dropouts after a lag; "
            f"{where.phrase}.",
            stream=facts.id,
            where=where.where,
            confidence_pct=min(95.0, 65.0 + 5.0 * int(at_top.sum())),
            claims=[claim(facts, np.union1d(chosen, late), min(0.95, 0.75 + 0.03 * int(at_top.sum())))],
            at_least="concern",
            from_s=begin_s,
            to_s=end_s,
        )


@rule(
    "loss-both-ways", group="network", limit=60.0, unit="%", basis=COMMON_PRACTICE,
    means="Both directions lost packets at the same moments, so what takes them carries both: a link, a tunnel, a "
    "host; or the capture itself, where nothing denies that.",
    measured_as="share of the lost packets of either direction whose gap falls into a gap of the other, and how "
    "much of that chance would make",
    check_next="Look at what both directions share; a report of a far receiver (RTCP) would tell whether it missed "
    "them too.",
)  # fmt: skip
def loss_both_ways(case: Case, limit: float) -> Iterator[Evidence]:
    """Loss on both directions at once."""
    for one in case.from_caller:
        for other in case.from_callee:
            yield from _both_ways(case, one, other, limit)


def _both_ways(case: Case, one: StreamFacts, other: StreamFacts, limit: float) -> Iterator[Evidence]:
    pair = (one, other)
    chosen = [in_time(facts, _short_losses(case, facts)) for facts in pair]
    whole = (
        max(case.seconds(facts.assessed.started_ns) for facts in pair),
        min(case.seconds(facts.assessed.ended_ns) for facts in pair),
    )
    if not all(len(items) for items in chosen) or whole[1] <= whole[0]:
        return
    spans = [times_of(facts, items, case) for facts, items in zip(pair, chosen, strict=True)]
    hit = [falling_together(spans[k], spans[1 - k], TOGETHER_S) for k in (0, 1)]
    chance = max(by_chance(spans[k], spans[1 - k], TOGETHER_S, whole) for k in (0, 1))
    shared = [ours[together] for ours, together in zip(chosen, hit, strict=True)]
    counts = [facts.gone.packets for facts in pair]
    measured = min(
        percent(float(packets[ours].sum()), float(packets[items].sum()))
        for packets, ours, items in zip(counts, shared, chosen, strict=True)
    )
    if measured < limit or measured - 100.0 * chance < limit / 2:
        return
    begin, end = (column[hit[0]] for column in spans[0])
    events = 1 + int(events_of(begin, end, EVENT_APART_S)[-1])
    if chance**events > MOST_CHANCE:
        return
    lost = sum(int(packets[ours].sum()) for packets, ours in zip(counts, shared, strict=True))
    yield Evidence(
        measured=measured,
        says=f"{many(lost, 'packet')} were lost on both directions at the same moments ({times(events)}), so "
        "both sides heard dropouts together: what takes them carries both directions, and it sits before the "
        "capture point on either way, or is the capture itself.",
        where=UNKNOWN,
        confidence_pct=min(85.0, 60.0 + 5.0 * events),
        from_s=float(begin[0]),
        to_s=float(end[-1]),
        claims=[claim(facts, ours, 0.85) for facts, ours in zip(pair, shared, strict=True)],
        at_least="concern",
    )


def _short_losses(case: Case, facts: StreamFacts) -> NDArray[np.int64]:
    """Lost items that are no outage and that nothing else explains so far."""
    items = facts.lost_items
    return items[short_runs(facts) & (case.left(facts)[items] > 0.3)]
