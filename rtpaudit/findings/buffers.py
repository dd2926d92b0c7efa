"""Rules about the playout buffer: too small for the network, or for any network, or deeper than it has to be."""

from collections.abc import Iterator

import numpy as np

from rtpaudit.findings.case import Case
from rtpaudit.findings.excursions import excursions, is_calm
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.rule import BEFORE, COMMON_PRACTICE, ENDPOINT, UNKNOWN, Evidence, rule
from rtpaudit.findings.share import claim
from rtpaudit.findings.words import ms, pct
from rtpaudit.units import NS_PER_MS, percent

Y1541 = "ITU-T Y.1541, delay variation of classes 0 and 1"
WITHIN_MS = 50.0
"""delay variation that a network may have: ITU-T Y.1541, classes 0 and 1"""
LEAST_DISCARD_PCT = 0.1
LEAST_REPORTED_PCT = 0.4
"""reports round to 1/256"""
DEEPER_THAN_NEEDED = 2.0


@rule(
    "jitter-beyond-buffer", group="network", tier=2, limit=60.0, unit="ms", basis="profile",
    means="Packets came at such uneven times that the playout buffer did not suffice, and the late ones were "
    "discarded.",
    measured_as="delay that 99 % of the packets need in the buffer, against the buffer's delay, where packets come "
    "too late all along and the network varies by more than 50 ms (ITU-T Y.1541)",
    check_next="Look for queues without priority for voice and for radio on this way; a deeper buffer would help at "
    "the price of delay.",
)  # fmt: skip
def jitter_beyond_buffer(case: Case, limit: float) -> Iterator[Evidence]:
    """Delay variation that the buffer cannot even out."""
    yield from _too_late(case, limit, shallow=False)


@rule(
    "buffer-shallow", group="network", tier=2, limit=WITHIN_MS, unit="ms", basis=Y1541,
    means="The playout buffer is too small for delay variation that any network may have, and packets that were a "
    "little late were discarded.",
    measured_as="delay of the playout buffer, where it is below what 99 % of the packets need and the network stays "
    "within 50 ms",
    check_next="Give the receiver a deeper or an adaptive playout buffer.",
)  # fmt: skip
def buffer_shallow(case: Case, limit: float) -> Iterator[Evidence]:
    """A buffer too small for an ordinary network."""
    yield from _too_late(case, limit, shallow=True)


@rule(
    "buffer-deep", group="network", tier=2, limit=DEEPER_THAN_NEEDED, unit="times", basis=COMMON_PRACTICE,
    means="The playout buffer delays speech by far more than the network's delay variation asks for, and talking "
    "together suffers.",
    measured_as="delay of the playout buffer over what 99.9 % of the packets need and a packet on top",
    check_next="Make the receiver's buffer adaptive, or lower its nominal delay.",
)  # fmt: skip
def buffer_deep(case: Case, limit: float) -> Iterator[Evidence]:
    """A buffer that delays more than it has to."""
    for facts in case.streams:
        if facts.playback is None or not (facts.buffer_reported_ms > 0 or facts.buffer_given):
            continue
        simulated = facts.profile.playout.nominal_ms
        buffer = facts.buffer_reported_ms if facts.buffer_reported_ms > 0 else simulated
        needed = _needed_ms(facts, 99.9) + facts.packet_time_ms
        if not buffer >= limit * needed:
            continue
        rated, figures, spared = facts.rated, facts.assessed.figures, buffer - needed
        delay = rated.delay_ms - simulated + buffer
        gain = rated.R(figures.loss_pct, figures.burst_ratio, delay - spared)
        gain -= rated.R(figures.loss_pct, figures.burst_ratio, delay)
        if not gain >= 1.0:
            continue
        yield Evidence(
            measured=buffer / needed,
            says=f"The playout buffer of the {case.listener(facts)} holds speech back for {ms(buffer)} where "
            f"{ms(needed)} would do, so that answers come {ms(spared)} later than they need to.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=80.0 if facts.buffer_reported_ms > 0 else 60.0,
            r_points=gain,
            hidden_points=not rated.known,
        )


def _too_late(case: Case, limit: float, shallow: bool) -> Iterator[Evidence]:
    """Packets that come too late all along: as the listener reports them, else as the simulated buffer has them."""
    for facts in case.streams:
        varies = facts.calm_delay_ms(99.9)
        if (varies <= (limit if shallow else WITHIN_MS)) != shallow:
            continue
        if facts.discard_reported_pct >= LEAST_REPORTED_PCT:
            yield _reported(case, facts, varies, shallow)
        else:
            yield from _simulated(case, facts, varies, shallow)


def _reported(case: Case, facts: StreamFacts, varies: float, shallow: bool) -> Evidence:
    rated, figures, share = facts.rated, facts.assessed.figures, facts.discard_reported_pct
    buffer = facts.buffer_reported_ms
    here = 0.0 if np.isnan(figures.loss_pct) else figures.loss_pct
    depth = f" of {ms(buffer)}" if buffer > 0 else ""
    cause = "though the network varies by no more than" if shallow else "as delay varies by up to"
    return Evidence(
        measured=buffer if shallow and buffer > 0 else varies,
        says=f"The {case.listener(facts)} reports that {pct(share)} of the packets came too late for its playout "
        f"buffer{depth}, {cause} {ms(varies)} at the capture point: heard as crackle and dropouts.",
        stream=facts.id,
        where=ENDPOINT if shallow else UNKNOWN,
        confidence_pct=85.0,
        r_points=rated.R(here, 1.0) - rated.R(min(100.0, here + share), 1.0),
        hidden_points=not rated.known,
        limit=float("nan") if shallow or not buffer > 0 else buffer,
    )


def _simulated(case: Case, facts: StreamFacts, varies: float, shallow: bool) -> Iterator[Evidence]:
    late = facts.late_items
    late = late[case.left(facts)[late] > 0.3]
    share = percent(len(late), facts.sequence.expected)
    buffer = facts.profile.playout.nominal_ms
    if share < LEAST_DISCARD_PCT and is_calm(facts, buffer):
        return
    usual = _usual_ms(facts)
    # Whether packets come too late hangs on how late the first one was: variation over the buffer tells by itself.
    if not (share >= LEAST_DISCARD_PCT or usual > buffer) or (shallow and buffer >= WITHIN_MS):
        return
    needed = max(_needed_ms(facts, 99), usual)
    late_share = pct(share) if len(late) else "None"
    came = f"{late_share} of the packets to the {case.listener(facts)} came too late for a playout buffer of"
    cause = (
        f"only {ms(buffer)}, though the network varies by no more than {ms(varies)}"
        if shallow
        else f"{ms(buffer)}, as delay varies by {ms(needed)} and more"
    )
    luck = "that was luck, as the first packet was late itself"
    heard = f"heard as crackle and dropouts{_better(facts)}" if len(late) else luck
    yield Evidence(
        measured=buffer if shallow else needed,
        says=f"{came} {cause}: {heard}.",
        stream=facts.id,
        where=ENDPOINT if shallow else BEFORE,
        confidence_pct=75.0,
        claims=[claim(facts, late, 1.0)],
        at_least="concern" if usual > buffer else "remark",
        limit=float("nan") if shallow else buffer,
    )


def _usual_ms(facts: StreamFacts) -> float:
    """Delay above a slow base line that 95 % of the packets stay at or below, without excursions and overtaken ones."""
    found = excursions(facts, WITHIN_MS)
    above = found.above_ms[(found.event_of < 0) & ~facts.strayed[facts.timed.row]]
    return float(np.percentile(above, 95)) if len(above) >= 10 else 0.0


def _needed_ms(facts: StreamFacts, share_pct: float) -> float:
    """Delay that so many of the packets need in a fixed buffer."""
    if facts.playback is None:
        return float("nan")
    return max(0.0, float(np.percentile(facts.playback.played.required_ns, share_pct)) / NS_PER_MS)


def _better(facts: StreamFacts) -> str:
    """What another fixed buffer would have done, as a clause; "" where none is better by 3 points."""
    curve, rated = facts.assessed.curve, facts.rated
    if curve is None or not rated.known or facts.profile.playout.kind != "fixed":
        return ""
    now = float(np.interp(facts.profile.playout.nominal_ms, curve.delay_ms, curve.r_factor))
    if not curve.best_r >= now + 3.0:
        return ""
    return f"; a buffer of {ms(curve.best_ms)} would have raised R from {now:.0f} to {curve.best_r:.0f}"
