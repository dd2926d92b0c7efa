"""Rules about the capture itself: what it dropped, doubled, cut or misdated. None of it is the network's fault."""

from collections.abc import Iterator
from itertools import islice

import numpy as np

from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.losses import times_of
from rtpaudit.findings.one_way import unseen_direction
from rtpaudit.findings.path import copies_of, mirrored
from rtpaudit.findings.patterns import Step, falling_together, lasting_steps
from rtpaudit.findings.rule import CAPTURE, COMMON_PRACTICE, Evidence, rule
from rtpaudit.findings.share import claim
from rtpaudit.findings.words import many, ms, number, pct
from rtpaudit.units import percent

CLOCK_STEP_MS = 30.0
FEWEST_DENIED = 3
MOST_SHARE = 0.7
"""of the gaps, and of the other streams, that have to agree"""
TOGETHER_LOST_S = 0.03
MOST_ASKED = 50
"""streams beside one that are asked whether they miss packets, or step, at the same moments"""
TOGETHER_S = 0.1
"""within which the steps of several streams are one step of the clock"""


@rule(
    "capture-drops", group="capture", tier=0, limit=0.1, unit="%", basis=COMMON_PRACTICE,
    means="Packets are missing in the capture that were there on the line: the capture host could not keep up. The "
    "network is not to blame, and figures of loss are worse than what was heard.",
    measured_as="share of the expected packets that this capture misses, where the capture's own statistics count "
    "drops, where the far receiver (RTCP) denies the loss, or where all streams between different ends miss packets "
    "at the same moments",
    check_next="Capture again with a larger buffer, a filter or a shorter snap length, and look at the capture "
    "host's drop counter.",
    severity="by what the missing packets would take from the rating, as far as the capture is to blame",
)  # fmt: skip
def capture_drops(case: Case, limit: float) -> Iterator[Evidence]:
    """Packets that only the capture misses."""
    for facts in case.streams:
        items = facts.lost_items
        share = percent(float(facts.gone.packets[items].sum()), facts.sequence.expected)
        if not share >= limit:
            continue
        dropped = case.whole.frames_dropped(facts)
        denied = _denied(facts)
        together = _missing_everywhere(case, facts)
        sure = max(0.95 if denied else 0.0, 0.9 if dropped else 0.0, together)
        if sure < 0.3:
            continue
        why = [
            f"the capture host counted {many(dropped, 'dropped frame')}" if dropped else "",
            "the far receiver reports that it got them" if denied else "",
            "streams between other ends miss packets at the same moments" if together else "",
        ]
        yield Evidence(
            measured=share,
            says=f"{pct(share)} of the packets to the {case.listener(facts)} are missing in the capture, not on the "
            f"line: {' and '.join(one for one in why if one)}.",
            stream=facts.id,
            where=CAPTURE,
            confidence_pct=100.0 * sure,
            claims=[claim(facts, items, sure)],
            at_least="concern" if share >= 1.0 else "remark",
        )


@rule(
    "capture-one-way", group="capture", limit=2.0, unit="s", basis=COMMON_PRACTICE,
    means="The capture sees one direction of the call only, because the other takes another way or the mirror "
    "copies one direction of a port. What the unseen side heard cannot be told.",
    measured_as="length of the media of one direction, where reports (RTCP) of its sender tell of packets in the "
    "other, or where nothing at all that goes the other way is in the capture",
    check_next="Mirror both directions of the port, or capture where both ways meet.",
    severity="a concern",
)  # fmt: skip
def capture_one_way(case: Case, limit: float) -> Iterator[Evidence]:
    """A capture that sees one direction only."""
    unseen = unseen_direction(case)
    if unseen is None or unseen.seconds < limit or (case.call.signalled is not None and unseen.sure < 0.5):
        return
    told = f": {unseen.why}" if unseen.why else ", and nothing tells whether the other exists"
    yield Evidence(
        measured=unseen.seconds,
        says=f"The capture shows one direction of this call only{told}.",
        where=CAPTURE,
        confidence_pct=100.0 * unseen.sure,
        at_least="concern" if unseen.sure > 0.5 else "remark",
        at_most="concern" if unseen.sure > 0.5 else "remark",
        gravity=20.0,
    )


@rule(
    "capture-doubled", group="capture", limit=40.0, unit="%", basis=COMMON_PRACTICE,
    means="The capture holds most packets twice, because a mirror port copies each frame where it comes in and "
    "where it goes out. Figures count each once.",
    measured_as="share of captured packets that are the very same datagram (IP identification and payload) within 5 ms",
    check_next="Mirror one direction of the port only, or one port only.",
    severity="a concern",
)  # fmt: skip
def capture_doubled(case: Case, limit: float) -> Iterator[Evidence]:
    """A mirror that copies frames twice."""
    doubled = [facts for facts in case.streams if mirrored(facts)]
    if not doubled:
        return
    shares = [
        percent(one.assessed.figures.packets_duplicated, one.assessed.figures.packets_captured) for one in doubled
    ]
    if max(shares) < limit:
        return
    lag = float(np.median([copies_of(one).lag_ms for one in doubled]))
    which = "all streams" if len(doubled) == len(case.streams) else many(len(doubled), "stream")
    yield Evidence(
        measured=max(shares),
        says=f"The capture holds the packets of {which} of this call twice, the very same datagrams {ms(lag)} apart: "
        "a mirror port doubles them, and nothing on the line does.",
        where=CAPTURE,
        confidence_pct=95.0,
        at_least="concern",
        at_most="concern",
    )


@rule(
    "capture-cut", group="capture", limit=1.0, unit="%", basis=COMMON_PRACTICE,
    means="The capture cut packets short (its snap length), so that the sound in them is incomplete. Figures of the "
    "network are not touched.",
    measured_as="share of packets of which fewer octets were captured than their header says",
    check_next="Capture again without a snap length, or with one of 256 octets and more.",
    severity="a concern",
)  # fmt: skip
def capture_cut(case: Case, limit: float) -> Iterator[Evidence]:
    """Packets cut short by the capture."""
    cut = sum(int((facts.packets.captured < facts.packets.length).sum()) for facts in case.streams)
    whole = sum(len(facts.packets) for facts in case.streams)
    share = percent(cut, whole)
    if not share >= limit:
        return
    yield Evidence(
        measured=share,
        says=f"{pct(share)} of this call's packets were cut short by the capture, so that their sound is incomplete; "
        "figures of the network stand.",
        where=CAPTURE,
        confidence_pct=99.0,
        at_least="concern",
        at_most="concern",
    )


@rule(
    "capture-clock-step", group="capture", tier=0, limit=CLOCK_STEP_MS, unit="ms", basis=COMMON_PRACTICE,
    means="The clock of the capture host was set while it captured: all streams seem to step at once. Delay, jitter "
    "and discards around that moment are no matter of the network.",
    measured_as="step of the delay that all streams show at the same moment, of the same height and for good; or "
    "arrival times that go back",
    check_next="Look at the time synchronisation of the capture host; leave delay figures around that moment out.",
    severity="a concern",
)  # fmt: skip
def capture_clock_step(case: Case, limit: float) -> Iterator[Evidence]:
    """A capture clock that was set."""
    steps = {facts.id: clock_steps(facts, limit) for facts in case.streams}
    for facts in case.streams:
        for step, at_ns, back in steps[facts.id]:
            beside = (one for one in [*case.streams, *case.elsewhere()] if one is not facts and _runs_at(one, at_ns))
            others = list(islice(beside, MOST_ASKED))
            agreeing = [one for one in others if _agrees(clock_steps(one, limit), step, at_ns)]
            if not back and (not others or len(agreeing) < len(others) / 2):
                continue
            at = case.seconds(at_ns)
            affected = [one for one in case.streams if one is facts or one in agreeing]
            yield Evidence(
                measured=abs(step.height),
                says=f"At {number(at)} s the capture's own clock stepped {'back' if step.height < 0 else 'forward'} "
                f"by {ms(abs(step.height))}, in {many(1 + len(agreeing), 'stream')} at once: delay and discards "
                "there are no matter of the network.",
                where=CAPTURE,
                confidence_pct=95.0 if agreeing else 80.0,
                from_s=at,
                to_s=at,
                claims=[claim(one, _late_from(one, at_ns), 0.95) for one in affected],
                at_least="concern",
            )
            return


def clock_steps(facts: StreamFacts, least_ms: float) -> list[tuple[Step, int, bool]]:
    """Steps of a stream's delay for good, when each was, and whether the arrival times themselves went back."""
    name = f"clock steps from {least_ms:g} ms"
    if name not in facts.remembered:
        facts.remembered[name] = _clock_steps(facts, least_ms)
    found = facts.remembered[name]
    assert isinstance(found, list)
    return found


def _clock_steps(facts: StreamFacts, least_ms: float) -> list[tuple[Step, int, bool]]:
    timed = facts.timed
    time_ns = facts.packets.time_ns[timed.row]
    beside = max(5, round(500 / facts.packet_time_ms))
    return [
        (one, int(time_ns[one.at]), bool(time_ns[one.at] < time_ns[one.at - 1]))
        for one in lasting_steps(timed.delay_ms, least_ms, beside)
    ]


def _runs_at(facts: StreamFacts, at_ns: int) -> bool:
    """Whether a stream has packets on both sides of a moment."""
    slack = 500_000_000
    return facts.assessed.started_ns < at_ns - slack and facts.assessed.ended_ns > at_ns + slack


def _agrees(steps: list[tuple[Step, int, bool]], step: Step, at_ns: int) -> bool:
    slack_ns = TOGETHER_S * 1e9 + abs(step.height) * 1e6
    return any(
        abs(one.height - step.height) <= 5.0 + 0.1 * abs(step.height) and abs(when - at_ns) <= slack_ns
        for one, when, _ in steps
    )


def _late_from(facts: StreamFacts, at_ns: int) -> np.ndarray:
    """Late items from a moment on, until the end of the talkspurt that it fell into."""
    after = np.flatnonzero(facts.packets.time_ns[facts.timed.row] >= at_ns)
    return facts.late_within_talkspurt(int(facts.timed.row[after[0]])) if len(after) else facts.late_items[:0]


def _denied(facts: StreamFacts) -> bool:
    """Whether the far receiver reports far less loss than this capture shows in the same intervals.

    It counts copies as received (RFC 3550, A.3), so that they hide losses from it and here they may not.
    """
    far = facts.assessed.far_end
    if far is None or far.between is None or len(far.captured_loss_pct) != len(far.set_aside):
        return False
    good = np.array([not why for why in far.set_aside], np.bool_)
    shown = far.captured_loss_pct * far.between.expected / 100.0
    good &= ~np.isnan(shown) & ~np.isnan(far.between.lost)
    expected = float(far.between.expected[good].sum())
    copies = facts.assessed.figures.packets_duplicated
    missing = float(shown[good].sum()) - copies
    reported = float(far.between.lost[good].sum())
    return missing >= max(FEWEST_DENIED, 0.005 * expected) and reported < 0.3 * missing


def _missing_everywhere(case: Case, facts: StreamFacts) -> float:
    """How sure it is that the capture missed them, as streams between other ends miss packets at the same moments."""
    own = times_of(facts, facts.lost_items, case)
    running, strangers = case.whole.crowd.strangers(facts)
    if not strangers or not len(own[0]) or len(strangers) < MOST_SHARE * running:
        return 0.0
    # So many tell as well as all; all against all of thousands would take hours.
    asked = strangers[:: max(1, len(strangers) // MOST_ASKED)]
    hits = [falling_together(own, times_of(one, one.lost_items, case), TOGETHER_LOST_S).mean() for one in asked]
    return 0.85 if float(np.max(hits)) >= MOST_SHARE else 0.0
