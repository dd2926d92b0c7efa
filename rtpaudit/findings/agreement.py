"""Rules about what was agreed and what was sent: encodings, payload types, packet times."""

from collections.abc import Iterator

import numpy as np

from rtpaudit.findings.agreed import FEW_PACKETS, sides
from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.rule import COMMON_PRACTICE, ENDPOINT, Evidence, rule
from rtpaudit.findings.words import ms, pct
from rtpaudit.media.streams import Content
from rtpaudit.units import NS_PER_S, percent

SAMPLE_BY_SAMPLE = ("PCMU", "PCMA", "G722")
"""encodings that could be cut anywhere, and are cut at multiples of 5 ms (common practice)"""


@rule(
    "encodings-differ", group="call", limit=1, unit="", basis=COMMON_PRACTICE,
    means="The two directions of the call use different encodings. That is permitted, but costs a conversion where "
    "the call is joined to another, and often shows that preferences were set by mistake.",
    measured_as="encoding of most packets of each direction",
    check_next="Compare the order of encodings that both sides offer and answer with.",
    severity="a concern",
)  # fmt: skip
def encodings_differ(case: Case, limit: float) -> Iterator[Evidence]:
    """Different encodings per direction."""
    used = [_main_encoding(streams) for streams in case.directions]
    if "" in used or used[0] == used[1]:
        return
    yield Evidence(
        measured=2,
        says=f"The caller sends {used[0]} and the callee {used[1]}: permitted, but it costs a conversion on the way.",
        where=ENDPOINT,
        confidence_pct=95.0,
        at_least="concern",
        at_most="concern",
        limit=limit,
    )


@rule(
    "payload-type-not-agreed", group="endpoint", limit=1.0, unit="%", basis="RFC 3264, 5.1",
    means="A side sends an encoding that the other did not offer to receive: it may play noise or nothing.",
    measured_as="share of a stream's audio packets whose payload type the receiver's description in force does not "
    "list",
    check_next="Compare what the receiver offered with what this sender chose, and look at who changed the "
    "description on the way.",
    severity="a fault where most packets are concerned, else a concern",
)  # fmt: skip
def payload_type_not_agreed(case: Case, limit: float) -> Iterator[Evidence]:
    """A payload type that the receiver never announced."""
    for listener, streams in sides(case):
        for facts in streams:
            wrong, whole = _not_agreed(case, facts, listener)
            share = percent(wrong, whole)
            if not share >= limit:
                continue
            talker = case.talker(facts)
            yield Evidence(
                measured=share,
                says=f"{pct(share)} of the {talker}'s packets carry an encoding ({facts.stream.encoding}, payload "
                f"type {facts.stream.payload_type}) that the {listener} did not offer to receive: it may have heard "
                "noise or nothing.",
                stream=facts.id,
                where=ENDPOINT,
                confidence_pct=90.0,
                at_least="fault" if share > 50 else "concern",
                gravity=60.0 if share > 50 else 5.0,
            )


@rule(
    "packet-time-wrong", group="endpoint", limit=60.0, unit="ms", basis="RFC 4566, 6 (ptime)",
    means="A side sends another packet time than the receiver asked for, or one so long that a single lost packet "
    "is heard.",
    measured_as="speech in most packets, against a=ptime of the receiver's description in force, or against the limit",
    check_next="Set the packet time of the sender to what the receiver asks for; where both are right, look for a "
    "device between.",
    severity="a concern",
)  # fmt: skip
def packet_time_wrong(case: Case, limit: float) -> Iterator[Evidence]:
    """Another packet time than agreed."""
    for listener, streams in sides(case):
        for facts in streams:
            found = facts.stream.packet_time_ms
            asked = _asked_packet_time(case, facts, listener)
            differs = abs(found - asked) > 1.0
            odd = facts.stream.encoding in SAMPLE_BY_SAMPLE and found % 5.0 > 0.01
            if not differs and not found > limit and not odd:
                continue
            told = "which few receivers expect" if odd else "so that each lost packet takes a syllable"
            told = f"while the {listener} asked for {ms(asked)}" if differs else told
            yield Evidence(
                measured=found,
                says=f"The {case.talker(facts)} sends {ms(found)} of speech in a packet, {told}.",
                stream=facts.id,
                where=ENDPOINT,
                confidence_pct=90.0,
                limit=asked if differs else float("nan"),
                at_least="concern",
                at_most="concern",
            )


def _main_encoding(streams: list[StreamFacts]) -> str:
    """Encoding of most packets of a direction; "" without any, or where it is unknown."""
    most = max(streams, key=lambda facts: len(facts.packets), default=None)
    if most is None or len(most.packets) < FEW_PACKETS or most.stream.encoding == "unknown":
        return ""
    return most.stream.encoding


def _not_agreed(case: Case, facts: StreamFacts, listener: str) -> tuple[int, int]:
    """Audio packets whose type the receiver's term in force does not list, and those that a term was in force for."""
    said = case.call.signalled
    if said is None or facts.stream.match_basis == "time":
        return 0, 0
    packets = facts.packets
    audio = packets.content == Content.AUDIO
    wrong = whole = 0
    for term in said.media:
        if term.side != listener or term.kind != "audio" or not term.encodings or term.early:
            continue
        # What was on its way when the description changed is no fault.
        first, last = term.from_ns + NS_PER_S // 2, (1 << 62) if term.until_ns is None else term.until_ns
        inside = audio & (packets.time_ns >= first) & (packets.time_ns < last)
        whole += int(inside.sum())
        wrong += int((inside & ~np.isin(packets.payload_type, list(term.encodings))).sum())
    return wrong, whole


def _asked_packet_time(case: Case, facts: StreamFacts, listener: str) -> float:
    """Packet time that the receiver asked for in the middle of the stream, NaN where it asked for none. [ms]"""
    said = case.call.signalled
    if said is None:
        return float("nan")
    middle = (facts.assessed.started_ns + facts.assessed.ended_ns) // 2
    asked = [
        one.packet_time_ms
        for one in said.terms_at(middle)
        if one.side == listener and one.kind == "audio" and not one.early
    ]
    return asked[-1] if asked else float("nan")
