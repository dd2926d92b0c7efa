"""Which direction of a call the capture does not show, and how sure it is that this is the capture's own blindness."""

from dataclasses import dataclass

from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.units import NS_PER_S

FEWEST_MESSAGES = 2
SHORTEST_S = 2.0
MULTICAST = ("224.", "225.", "226.", "227.", "228.", "229.", "23", "ff")


@dataclass(frozen=True, slots=True)
class Unseen:
    """A direction without any stream while the other has one."""

    listener: str
    """who heard nothing, if nothing was sent"""
    seconds: float
    """length of what the other direction shows"""
    sure: float
    """how sure it is that the direction exists and the capture does not see it [0 to 1]"""
    why: str
    """clause that says so, "" where nothing tells"""


def unseen_direction(case: Case) -> Unseen | None:
    """The direction that has no stream; None where both have, or neither."""
    streams = case.from_caller or case.from_callee
    if bool(case.from_caller) == bool(case.from_callee):
        return None
    longest = max(streams, key=lambda facts: facts.duration_s)
    if longest.duration_s < SHORTEST_S or longest.stream.destination.startswith(MULTICAST):
        return None
    # Who sends the stream that is there is who would have heard the missing one.
    listener = case.talker(longest)
    if _reports_on_unseen(case, longest):
        why = f"reports of the {listener} tell of packets that it received and the capture does not hold"
        return Unseen(listener, longest.duration_s, 0.95, why)
    if _speaks_alone(case, longest):
        why = f"the capture holds nothing at all that was sent to the {listener}, signalling included"
        return Unseen(listener, longest.duration_s, 0.9, why)
    other = dict(zip(("caller", "callee"), ("callee", "caller"), strict=True))[listener]
    if _far_end_sends(longest):
        why = f"the {other}'s own reports say that it was sending"
        return Unseen(listener, longest.duration_s, 0.8, why)
    if longest.assessed.far_end is not None and longest.assessed.far_end.blocks:
        return Unseen(listener, longest.duration_s, 0.2, "")
    return Unseen(listener, longest.duration_s, 0.5 if case.call.signalled is None else 0.2, "")


def _reports_on_unseen(case: Case, facts: StreamFacts) -> bool:
    """Whether the sender of a stream reports on a source of which the capture has no stream."""
    reported = case.whole.assessment.reported.get(facts.stream.recording)
    if reported is None:
        return False
    seen = case.whole.ssrcs
    begin, end = facts.assessed.started_ns - NS_PER_S, facts.assessed.ended_ns + 10 * NS_PER_S
    return any(
        begin <= said.time_ns <= end
        and said.destination == facts.stream.destination
        and said.block.ssrc not in seen
        and getattr(said.block, "highest_sequence", 0) > 0
        for said in reported.blocks_from(facts.stream.source)
    )


def _far_end_sends(facts: StreamFacts) -> bool:
    """Whether the receiver's reports come as sender reports, which only senders make (RFC 3550, 6.4)."""
    far = facts.assessed.far_end
    return far is not None and sum(said.kind == "sender" for said in far.blocks) >= 2


def _speaks_alone(case: Case, facts: StreamFacts) -> bool:
    """Whether all signalling of the call came from the side that sends the stream."""
    said = case.call.signalled
    if said is None or len(said.messages) < FEWEST_MESSAGES:
        return False
    sources = {message.source for message in said.messages}
    targets = {message.destination for message in said.messages}
    return not sources & targets and facts.assessed.far_end is None
