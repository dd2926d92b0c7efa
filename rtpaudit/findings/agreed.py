"""What was agreed, beside what media came: when each side waited for media, and why none may have come."""

from dataclasses import dataclass
from ipaddress import ip_address, ip_network

import numpy as np

from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.media.streams import Content
from rtpaudit.signalling.calls import CALLEE, CALLER, MediaTerm, SipCall
from rtpaudit.units import NS_PER_S

PRIVATE = tuple(
    ip_network(one)
    for one in (
        "10.0.0.0/8",
        "172.16.0.0/12",
        "192.168.0.0/16",
        "100.64.0.0/10",
        "169.254.0.0/16",
        "fc00::/7",
        "fe80::/10",
    )
)
"""Addresses that lead nowhere outside their own network (RFC 1918, RFC 6598, RFC 3927, RFC 4193; from memory)."""

FEW_PACKETS = 10
"""so few are no media: a probe, or what was on its way"""


@dataclass(frozen=True, slots=True)
class Awaited:
    """Media that one side waited for after the answer."""

    by: str
    """who waited: caller or callee"""
    term: MediaTerm
    seconds: float
    """for how long"""
    packets: int
    """that came in that time"""


def sides(case: Case) -> tuple[tuple[str, list[StreamFacts]], tuple[str, list[StreamFacts]]]:
    """Each listener with the streams that it hears."""
    return (CALLER, case.from_callee), (CALLEE, case.from_caller)


def awaited(case: Case) -> list[Awaited]:
    """What each side waited for, from the answer to the release; times on hold left out."""
    said = case.call.signalled
    if said is None or said.answered_ns is None or said.fax:
        return []
    found = []
    for by, streams in sides(case):
        spans = _waiting(said, by, said.answered_ns, case.heard_until_ns)
        if not spans:
            continue
        packets = sum(packets_within(facts, first, last) for facts in streams for first, last, _ in spans)
        whole = sum(last - first for first, last, _ in spans) / NS_PER_S
        found.append(Awaited(by, spans[-1][2], whole, packets))
    return found


def _waiting(said: SipCall, by: str, from_ns: int, until_ns: int) -> list[tuple[int, int, MediaTerm]]:
    """Times in which a side asked for audio and the other side had not said that it would send none."""
    other = CALLEE if by == CALLER else CALLER
    mute = [
        (term.from_ns, until_ns if term.until_ns is None else term.until_ns)
        for term in said.media
        if term.side == other and term.kind == "audio" and term.direction in ("recvonly", "inactive")
    ]
    mute += [(hold.from_ns, until_ns if hold.until_ns is None else hold.until_ns) for hold in said.holds]
    spans = []
    for term in said.media:
        if term.side != by or term.kind != "audio" or not term.receives or term.port == 0:
            continue
        first, last = max(term.from_ns, from_ns), min(until_ns if term.until_ns is None else term.until_ns, until_ns)
        for begin, end in mute:
            if begin <= first < end:
                first = end
            elif first < begin < last:
                last = begin
        if last > first:
            spans.append((first, last, term))
    return spans


def packets_within(facts: StreamFacts, from_ns: int, until_ns: int) -> int:
    """Packets of a stream between two times."""
    time = facts.packets.time_ns
    return int(((time >= from_ns) & (time < until_ns)).sum())


def why_nothing_came(case: Case, missing: Awaited) -> list[str]:
    """What the capture shows that may explain why a side got no media, as clauses."""
    term, other = missing.term, "callee" if missing.by == "caller" else "caller"
    reasons = []
    if is_private(term.address) and not any(is_private(one) for one in _seen_hosts(case, missing.by)):
        reasons.append(f"the {missing.by} announced a private address, which the {other} cannot reach")
    if _refused(case, term):
        reasons.append(f"a host answered that the {missing.by}'s port is unreachable")
    coming = dict(sides(case))[missing.by]
    if coming and case.call.answered_ns is not None:
        early = all(facts.assessed.ended_ns <= case.call.answered_ns + NS_PER_S // 2 for facts in coming)
        if early:
            reasons.append("media came before the answer only")
    if not coming and not term.encodings:
        reasons.append(f"the {missing.by} announced no encoding that is known here")
    return reasons


def is_private(address: str) -> bool:
    """Whether an address leads nowhere outside its own network."""
    try:
        found = ip_address(address)
    except ValueError:
        return False
    return any(found in net for net in PRIVATE if net.version == found.version)


def _seen_hosts(case: Case, side: str) -> set[str]:
    """Addresses from which a side was seen to send."""
    own = case.from_caller if side == CALLER else case.from_callee
    hosts = {facts.stream.source for facts in own}
    said = case.call.signalled
    if said is not None:
        party = said.caller if side == CALLER else said.callee
        host = party.address.rpartition(":")[0].strip("[]")
        hosts |= {host} if host else set()
    return hosts or {""}


def _refused(case: Case, term: MediaTerm) -> bool:
    """Whether an ICMP error speaks of the announced address and port."""
    return any(
        error.destination == term.address and error.destination_port == term.port
        for error in case.whole.unreachable(case)
    )


def suppresses_silence(facts: StreamFacts) -> bool:
    """Whether a stream leaves out packets in pauses: timestamps go on where numbers do not."""
    packets, order = facts.packets, facts.sequence.order
    following = np.diff(facts.sequence.place) == 1
    steps = np.diff(packets.media_ticks[order])[following]
    usual = facts.packet_time_ms * facts.stream.clock_rate_hz / 1000
    return sends_comfort_noise(facts) or bool(len(steps) and (steps > 2.5 * usual).any())


def sends_comfort_noise(facts: StreamFacts) -> bool:
    """Whether a stream says how its silence sounds (RFC 3389): such a sender speaks up at once."""
    return bool((facts.packets.content == Content.COMFORT_NOISE).any())
