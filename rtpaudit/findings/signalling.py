"""Rules about the call: media that is missing, late or goes on too long, and what was agreed against what came."""

from collections.abc import Iterator

from rtpaudit.findings.agreed import (
    FEW_PACKETS,
    Awaited,
    awaited,
    sends_comfort_noise,
    sides,
    suppresses_silence,
    why_nothing_came,
)
from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.one_way import Unseen, unseen_direction
from rtpaudit.findings.rule import COMMON_PRACTICE, ENDPOINT, UNKNOWN, Evidence, rule
from rtpaudit.findings.words import seconds
from rtpaudit.units import NS_PER_S

LONG_TALKSPURT_S = 10.0
"""nobody speaks so long without a pause"""


@rule(
    "no-media", group="call", limit=2.0, unit="s", basis=COMMON_PRACTICE,
    means="The call was answered, and no voice packet passed in either direction: both sides heard nothing.",
    measured_as="time from the answer to the release in which both sides waited for media and none came",
    check_next="Compare the addresses that both sides announced with where each can send to, and look at firewalls, "
    "address translation and relays on the way.",
    severity="a fault",
)  # fmt: skip
def no_media(case: Case, limit: float) -> Iterator[Evidence]:
    """An answered call without any media."""
    missing = [one for one in awaited(case) if one.packets < FEW_PACKETS]
    if len(missing) < 2 or max(one.seconds for one in missing) < limit:
        return
    reasons = list(dict.fromkeys(why for one in missing for why in why_nothing_came(case, one)))
    waited = max(one.seconds for one in missing)
    yield Evidence(
        measured=waited,
        says=f"The call was answered, and in {seconds(waited)} no voice packet passed in either direction, so that "
        f"both sides heard nothing{_because(reasons)}.",
        where=UNKNOWN,
        confidence_pct=90.0 if reasons else 75.0,
        from_s=case.seconds(case.call.answered_ns or case.call.started_ns),
        to_s=case.seconds(case.heard_until_ns),
        at_least="fault",
        gravity=95.0,
    )


@rule(
    "one-way-media", group="call", limit=2.0, unit="s", basis=COMMON_PRACTICE,
    means="Voice packets passed in one direction only, so that one side heard nothing.",
    measured_as="time after the answer in which one side waited for media and none came while the other side got some",
    check_next="Look at the silent side's microphone and mute first, then at firewall and address translation from "
    "it to the capture point; a capture at its end would tell whether it sends.",
    severity="a fault; a concern where neither signalling nor reports tell whether the other direction exists",
)  # fmt: skip
def one_way_media(case: Case, limit: float) -> Iterator[Evidence]:
    """Media in one direction only."""
    unseen = unseen_direction(case)
    if unseen is not None and unseen.sure >= 0.8:
        return
    waiting = awaited(case)
    missing = [one for one in waiting if one.packets < FEW_PACKETS and one.seconds >= limit]
    if len(missing) == 1 and any(one.packets >= FEW_PACKETS for one in waiting):
        yield _nothing_heard(case, missing[0])
    elif case.call.signalled is None and unseen is not None:
        yield _lone_stream(unseen)


def _nothing_heard(case: Case, missing: Awaited) -> Evidence:
    reasons = why_nothing_came(case, missing)
    return Evidence(
        measured=missing.seconds,
        says=f"The {missing.by} heard nothing: in {seconds(missing.seconds)} after the answer no voice packet to the "
        f"{missing.by} passed, while the other direction worked{_because(reasons)}.",
        where=UNKNOWN,
        confidence_pct=90.0 if reasons else 80.0,
        from_s=case.seconds(case.call.answered_ns or case.call.started_ns),
        to_s=case.seconds(case.heard_until_ns),
        at_least="fault",
        gravity=90.0,
    )


def _lone_stream(unseen: Unseen) -> Evidence:
    return Evidence(
        measured=unseen.seconds,
        says=f"Only one direction of media is in this capture, for {seconds(unseen.seconds)}: {_either(unseen)}.",
        where=UNKNOWN,
        confidence_pct=100.0 * (1.0 - unseen.sure),
        at_least="concern",
        at_most="concern",
        check_next="A capture at the other end, its signalling or its reports (RTCP) would tell.",
    )


@rule(
    "media-late", group="call", limit=1.0, unit="s", basis=COMMON_PRACTICE,
    means="The call was answered, and it took a while until the first voice packet came, so that the first words "
    "were lost.",
    measured_as="time from the answer (2xx) to the first voice packet of a direction, unless senders leave out silence",
    check_next="Look at the device that answers, and at relays and address translation that open the way only after "
    "a packet from inside.",
    severity="a concern, a fault from three times the limit",
)  # fmt: skip
def media_late(case: Case, limit: float) -> Iterator[Evidence]:
    """Media that begins long after the answer."""
    answered_ns = case.call.answered_ns
    if answered_ns is None or case.call.signalled is None:
        return
    for listener, streams in sides(case):
        if not streams:
            continue
        first = min(facts.assessed.started_ns for facts in streams)
        late = (first - answered_ns) / NS_PER_S
        if late < limit or _held_until(case, first) or _may_leave_out_silence(case, streams):
            continue
        yield Evidence(
            measured=late,
            says=f"The first voice packet to the {listener} came {seconds(late)} after the answer, so that the "
            f"{listener} missed the first words.",
            stream=min(streams, key=lambda facts: facts.assessed.started_ns).id,
            where=UNKNOWN,
            confidence_pct=90.0,
            from_s=case.seconds(answered_ns),
            to_s=case.seconds(first),
            at_least="fault" if late >= 3 * limit else "concern",
            gravity=5.0 * late,
        )


@rule(
    "setup-slow", group="call", limit=5.0, unit="s", basis="ITU-T E.721, post-selection delay, from memory",
    means="After dialling, the caller waited long without hearing anything: neither ringing nor an answer.",
    measured_as="session request delay: first INVITE to the first response that is not 100, 401, 407 or a redirect "
    "(RFC 6076, 4.3)",
    check_next="Look at which hop answers late: name look-ups that time out, routes that are tried one after the "
    "other, and retransmissions.",
    severity="a concern",
)  # fmt: skip
def setup_slow(case: Case, limit: float) -> Iterator[Evidence]:
    """A long wait before the first sign of life."""
    delay = case.call.setup_delay_s
    if not delay > limit:
        return
    yield Evidence(
        measured=delay,
        says=f"The caller waited {seconds(delay)} from dialling to the first sign of life from the other side.",
        where=UNKNOWN,
        confidence_pct=95.0,
        from_s=0.0,
        to_s=delay,
        at_least="concern",
        at_most="concern",
    )


@rule(
    "release-missing", group="call", limit=5.0, unit="s", basis=COMMON_PRACTICE,
    means="Media stopped on both sides, and nobody released the call, though the capture went on: the call was "
    "dropped, or its BYE took another way.",
    measured_as="time from the last voice packet of an answered call to the end of the capture, without a BYE",
    check_next="Look for a restart, a lost network or an expired session timer at that time; sessions may hang in "
    "the exchange.",
    severity="a concern",
)  # fmt: skip
def release_missing(case: Case, limit: float) -> Iterator[Evidence]:
    """A call that ends without BYE."""
    said = case.call.signalled
    if said is None or said.answered_ns is None or said.released_ns is not None or not case.streams:
        return
    last = max(facts.assessed.ended_ns for facts in case.streams)
    quiet = (case.whole.last_ns(case) - last) / NS_PER_S
    if quiet < (2 * limit if any(suppresses_silence(facts) for facts in case.streams) else limit) or _on_hold(
        case, last
    ):
        return
    yield Evidence(
        measured=quiet,
        says=f"Voice stopped on both sides and nobody released the call in the {seconds(quiet)} until the capture "
        "ended: it was dropped, or its BYE took another way.",
        where=UNKNOWN,
        confidence_pct=80.0,
        from_s=case.seconds(last),
        to_s=case.seconds(case.whole.last_ns(case)),
        at_least="concern",
        at_most="concern",
    )


@rule(
    "media-after-release", group="call", limit=1.0, unit="s", basis=COMMON_PRACTICE,
    means="A side went on sending voice after the call had been released: it did not get, or did not understand, "
    "the BYE.",
    measured_as="time from the BYE to the last voice packet",
    check_next="Look at whether that side answered the BYE, and at what it still thinks of the call; ports may stay "
    "occupied.",
    severity="a concern",
)  # fmt: skip
def media_after_release(case: Case, limit: float) -> Iterator[Evidence]:
    """Media that goes on after BYE."""
    said = case.call.signalled
    if said is None or said.answered_ns is None or said.released_ns is None:
        return
    for listener, streams in sides(case):
        last = max((facts.assessed.ended_ns for facts in streams), default=0)
        goes_on = (last - said.released_ns) / NS_PER_S
        if goes_on < limit:
            continue
        talker = "callee" if listener == "caller" else "caller"
        yield Evidence(
            measured=goes_on,
            says=f"The {talker} went on sending voice for {seconds(goes_on)} after the call had been released.",
            stream=max(streams, key=lambda facts: facts.assessed.ended_ns).id,
            where=ENDPOINT,
            confidence_pct=90.0,
            from_s=case.seconds(said.released_ns),
            to_s=case.seconds(last),
            at_least="concern",
            at_most="concern",
        )


@rule(
    "hold-not-released", group="call", limit=3.0, unit="s", basis="RFC 3264, 8.4",
    means="One side put the other on hold and never took it back before the call ended: the held side heard music "
    "or nothing.",
    measured_as="time from the last hold to the end of the call",
    check_next="Ask whether the hold was meant; otherwise look at how this device resumes calls.",
    severity="a concern",
)  # fmt: skip
def hold_not_released(case: Case, limit: float) -> Iterator[Evidence]:
    """A hold that lasts until the call ends."""
    said = case.call.signalled
    if said is None:
        return
    for hold in said.holds:
        lasted = (case.call.ended_ns - hold.from_ns) / NS_PER_S
        if hold.until_ns is not None or lasted < limit:
            continue
        held = "callee" if hold.side == "caller" else "caller"
        yield Evidence(
            measured=lasted,
            says=f"The {hold.side} put the {held} on hold and never took it back: the call ended {seconds(lasted)} "
            "later.",
            where=ENDPOINT,
            confidence_pct=90.0,
            from_s=case.seconds(hold.from_ns),
            to_s=case.seconds(case.call.ended_ns),
            at_least="concern",
            at_most="concern",
        )


def _either(unseen: Unseen) -> str:
    if unseen.sure < 0.5:
        return f"the {unseen.listener} heard nothing, as the other side reports on what it hears and sends nothing"
    return f"either the {unseen.listener} heard nothing, or the capture does not see the other direction"


def _because(reasons: list[str]) -> str:
    return f"; {' and '.join(reasons)}" if reasons else ""


def _may_leave_out_silence(case: Case, streams: list[StreamFacts]) -> bool:
    """Whether a direction may have sent nothing as nobody spoke: then a late packet may be a late word."""
    if any(suppresses_silence(facts) and not sends_comfort_noise(facts) for facts in streams):
        return True
    # One talkspurt alone shows no pause; what the other side does, both were likely set up to.
    brief = max(facts.duration_s for facts in streams) < LONG_TALKSPURT_S
    return brief and any(suppresses_silence(facts) and not sends_comfort_noise(facts) for facts in case.streams)


def _held_until(case: Case, time_ns: int) -> bool:
    """Whether a hold lay between the answer and a time."""
    said = case.call.signalled
    return said is not None and any(hold.from_ns < time_ns for hold in said.holds)


def _on_hold(case: Case, time_ns: int) -> bool:
    said = case.call.signalled
    return said is not None and any(
        hold.from_ns <= time_ns + NS_PER_S and (hold.until_ns is None or hold.until_ns > time_ns) for hold in said.holds
    )
