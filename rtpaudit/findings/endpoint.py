"""Rules about what the ends do: their clocks, packet times, pacing, numbering and timestamps."""

from collections.abc import Iterator

import numpy as np

from rtpaudit.findings.case import Case
from rtpaudit.findings.excursions import excursions
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.numbering import (
    packet_times_of,
    restarts_of,
    reused_numbers,
    skipped_numbers,
    successions,
    timestamp_rate,
    wrong_steps,
)
from rtpaudit.findings.pacing import STALL_MS, pacing_of, stalls_all_along
from rtpaudit.findings.patterns import lasting_steps
from rtpaudit.findings.place import hops_from_sender
from rtpaudit.findings.rule import COMMON_PRACTICE, ENDPOINT, Evidence, rule
from rtpaudit.findings.share import claim
from rtpaudit.findings.words import many, ms, number, pct, seconds, times
from rtpaudit.units import MS_PER_S, percent

FEW_SKIPPED = 3
"""numbers skipped at once, over which a single time counts"""
STOP_MS = 150.0
"""step of the delay for good that no other route makes (common practice)"""


@rule(
    "clock-skew", group="endpoint", limit=100.0, unit="ppm", basis=COMMON_PRACTICE,
    means="The sender's media clock runs too fast or too slow, so that the receiver's buffer slowly fills or "
    "empties and a packet has to be dropped or made up again and again.",
    measured_as="slope of arrival times against RTP timestamps over 30 s of audio and more, with its standard "
    "error; quartz oscillators stay within 50 ppm, so 100 ppm between two of them",
    check_next="Look at the clock source of that gateway or telephone: a free-running board, a virtual machine, a "
    "wrong sampling rate.",
    severity="a concern from the limit, a fault from five times the limit",
)  # fmt: skip
def clock_skew(case: Case, limit: float) -> Iterator[Evidence]:
    """A sender's clock that runs away."""
    for facts in case.streams:
        skew = facts.assessed.figures.clock_skew_ppm
        if not abs(skew) > limit or timestamp_rate(facts) is not None or not _stands_out(facts, skew):
            continue
        slip_s = facts.packet_time_ms / MS_PER_S / (abs(skew) * 1e-6)
        yield Evidence(
            measured=skew,
            says=f"The media clock of the {case.talker(facts)} runs {number(abs(skew))} ppm too "
            f"{'fast' if skew > 0 else 'slow'}, so that the {case.listener(facts)} has to "
            f"{'drop' if skew > 0 else 'make up'} a packet's worth of sound every {seconds(slip_s)}, heard as a "
            "click or a repeated syllable.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=90.0,
            at_least="fault" if abs(skew) >= 5 * limit else "concern",
        )


@rule(
    "sender-pacing", group="endpoint", tier=0, limit=50.0, unit="% of packet time", basis=COMMON_PRACTICE,
    means="The sender does not send its packets evenly but several at a time and then none, as a busy host or a "
    "coarse timer does.",
    measured_as="height of a sawtooth in the delays that repeats with every so many packets, where it explains most "
    "of their variance",
    check_next="Look at the load, the timer and the audio driver of the sender; the network is not the cause.",
    severity="by what late packets take from the rating; at least a concern",
)  # fmt: skip
def sender_pacing(case: Case, limit: float) -> Iterator[Evidence]:
    """A sender that sends in bunches."""
    for facts in case.streams:
        found = pacing_of(facts)
        if found is None and hops_from_sender(facts) == 0 and stalls_all_along(facts):
            yield _stalls(case, facts)
        yield from _stop(case, facts)
        if found is None or found.height_ms < limit / 100.0 * facts.packet_time_ms:
            continue
        late = facts.late_items
        yield Evidence(
            measured=percent(found.height_ms, facts.packet_time_ms),
            says=f"The {case.talker(facts)} sends {many(found.packets, 'packet')} at a time every "
            f"{ms(found.packets * facts.packet_time_ms)}, which uses up {ms(found.height_ms)} of every receiver's "
            f"buffer{f'; {len(late)} packets came too late for playout' if len(late) else ''}.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=min(95.0, 60.0 + 40.0 * found.explained),
            claims=[claim(facts, late, 0.9 * found.explained)],
            at_least="concern",
        )


def _stands_out(facts: StreamFacts, skew_ppm: float) -> bool:
    """Whether the drift over the stream is more than half of what packets are usually off anyway."""
    drift_ms = abs(skew_ppm) * 1e-6 * facts.duration_s * MS_PER_S
    usual = float(np.median(excursions(facts, STALL_MS).above_ms)) if len(facts.timed.row) else 0.0
    return drift_ms > 0.5 * usual


def _stalls(case: Case, facts: StreamFacts) -> Evidence:
    found = excursions(facts, STALL_MS)
    height = float(np.median(found.peak_ms))
    return Evidence(
        measured=percent(height, facts.packet_time_ms),
        says=f"The {case.talker(facts)} stops for about {ms(height)} again and again ({times(len(found.peak_ms))}) "
        "and then sends at once what it owes; no router lies between it and the capture, so that the sender itself "
        "is the likely cause.",
        stream=facts.id,
        where=ENDPOINT,
        confidence_pct=65.0,
        claims=[claim(facts, facts.late_items, 0.65)],
        at_least="concern",
    )


def _stop(case: Case, facts: StreamFacts) -> Iterator[Evidence]:
    """A pause after which a stream goes on with the very next sample, later by the pause for good."""
    beside = max(5, round(MS_PER_S / facts.packet_time_ms))
    steps = [one for one in lasting_steps(facts.timed.delay_ms, STOP_MS, beside) if one.height > 0]
    others = [one for one in case.streams if one is not facts]
    if not steps or any(lasting_steps(one.timed.delay_ms, STOP_MS / 2, beside) for one in others):
        return
    longest = max(steps, key=lambda one: one.height)
    row = int(facts.timed.row[longest.at])
    at = case.seconds(int(facts.packets.time_ns[row]))
    yield Evidence(
        measured=percent(longest.height, facts.packet_time_ms),
        says=f"The {case.talker(facts)} stopped sending {times(len(steps))}, for {ms(longest.height)} at the "
        "longest, and went on with the very next sample, so that all that followed came later by as much.",
        stream=facts.id,
        where=ENDPOINT,
        confidence_pct=70.0,
        from_s=at - longest.height / MS_PER_S,
        to_s=at,
        claims=[claim(facts, facts.late_within_talkspurt(row), 0.8)],
        at_least="concern",
    )


@rule(
    "packet-time-change", group="endpoint", limit=1, unit="changes", basis="RFC 3551, 4.2",
    means="The sender changed how much speech it puts into a packet while the call ran.",
    measured_as="changes of the timestamp step from packet to packet that last for 20 packets and more",
    check_next="Look for a re-negotiation or a transcoder at that time, and for receivers that cannot follow.",
    severity="a concern",
)  # fmt: skip
def packet_time_change(case: Case, limit: float) -> Iterator[Evidence]:
    """A packet time that changes in mid-stream."""
    for facts in case.streams:
        changes = packet_times_of(facts)
        if len(changes) - 1 < max(limit, 1):
            continue
        row, after = changes[1]
        at = case.seconds(int(facts.packets.time_ns[row]))
        yield Evidence(
            measured=len(changes) - 1,
            says=f"At {number(at)} s the {case.talker(facts)} changed its packet time from {ms(changes[0][1])} to "
            f"{ms(after)}{f' ({len(changes) - 1} changes in all)' if len(changes) > 2 else ''}: receivers with a "
            "fixed buffer may stumble.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=95.0,
            from_s=at,
            to_s=case.seconds(facts.assessed.ended_ns),
            at_least="concern",
            at_most="concern",
        )


@rule(
    "sequence-fault", group="endpoint", tier=0, limit=3, unit="faults", basis="RFC 3550, 5.1",
    means="The sender does not count its packets one by one: numbers are skipped though nothing is missing, stand "
    "still, or jump. Receivers take that for loss, or throw good packets away.",
    measured_as="runs of missing numbers over which timestamps and arrivals go on without a gap, numbers used twice "
    "for different packets, and jumps of the numbering within unbroken speech",
    check_next="Look at the sender's software, or at the device on the way that numbers packets anew.",
    severity="by what the skipped numbers take from the rating; at least a concern",
)  # fmt: skip
def sequence_fault(case: Case, limit: float) -> Iterator[Evidence]:
    """A sender that cannot count."""
    for facts in case.streams:
        skipped = skipped_numbers(facts)
        reused = reused_numbers(facts)
        jumps = sum(1 for one in restarts_of(facts) if one.timestamps_go_on)
        faults = len(skipped) + reused + (jumps if jumps else 0)
        far = int(facts.gone.packets[skipped].max(initial=0)) > FEW_SKIPPED
        if faults < limit and not jumps and not far:
            continue
        kinds = [
            f"{times(len(skipped))} numbers were skipped though no sound is missing" if len(skipped) else "",
            f"{many(reused, 'number')} stood on two different packets" if reused else "",
            f"the numbering jumped {times(jumps)} within unbroken speech" if jumps else "",
        ]
        told = " and ".join(one for one in kinds if one)
        yield Evidence(
            measured=faults,
            says=f"The numbering of packets from the {case.talker(facts)} is faulty: {told}; receivers take that for "
            "loss.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=90.0,
            claims=[claim(facts, skipped, 0.95)],
            at_least="concern",
        )


@rule(
    "timestamp-fault", group="endpoint", tier=0, limit=1.0, unit="%", basis="RFC 3550, 5.1",
    means="RTP timestamps do not tell the time of the speech: they stand still, go back, jump, or count at another "
    "rate than agreed. Receivers then play packets at the wrong moment or throw them away.",
    measured_as="share of neighbouring packets whose timestamps do not differ by the speech they carry while "
    "arrivals go on evenly; or one jump of 100 ms and more that arrivals do not bear out",
    check_next="Look at the sender's software, its codec setting (G.722 counts at 8000 Hz), or the device on the "
    "way that stamps anew.",
    severity="a fault where the clock rate is wrong, else at least a concern",
)  # fmt: skip
def timestamp_fault(case: Case, limit: float) -> Iterator[Evidence]:
    """Timestamps that do not tell the time."""
    for facts in case.streams:
        rate = timestamp_rate(facts)
        wrong = wrong_steps(facts)
        share = percent(wrong.odd, wrong.pairs)
        if rate is None and not share >= limit and not wrong.jumps:
            continue
        if rate is not None:
            says = f"count at about {number(rate)} Hz where {number(facts.stream.clock_rate_hz)} Hz was agreed"
        elif share >= limit:
            says = f"do not step by the speech in the packets ({pct(share)} of the packets)"
        else:
            says = f"jumped {times(wrong.jumps)}, by {ms(wrong.largest_ms)} at the most, while packets came evenly"
        yield Evidence(
            measured=share,
            says=f"RTP timestamps of the {case.talker(facts)} {says}, so that receivers play its speech at the wrong "
            "moments or discard it.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=90.0,
            claims=[claim(facts, facts.late_items, 0.9)],
            at_least="fault" if rate is not None else "concern",
            gravity=30.0 if rate is not None else 0.0,
        )


@rule(
    "source-restart", group="endpoint", tier=0, limit=1, unit="restarts", basis="RFC 3550, 5.1 and 8.2",
    means="The source of a stream began anew in mid-call, with another SSRC or other numbers: an endpoint, gateway "
    "or relay that was reset, replaced, or changed over. Receivers start again too, with a gap.",
    measured_as="changes of SSRC between the same two addresses, and jumps of both number and timestamp under one SSRC",
    check_next="Look for a restart, transfer, hold or change of relay at that time; the signalling tells which of "
    "them was meant.",
    severity="a concern",
)  # fmt: skip
def source_restart(case: Case, limit: float) -> Iterator[Evidence]:
    """A source that begins anew in mid-call."""
    for streams in case.directions:
        restarts = [one.time_ns for facts in streams for one in restarts_of(facts) if not one.timestamps_go_on]
        restarts += successions(streams)
        restarts = [time for time in sorted(restarts) if not case.renegotiated_near(time)]
        if len(restarts) < max(limit, 1):
            continue
        at = case.seconds(restarts[0])
        yield Evidence(
            measured=len(restarts),
            says=f"The stream of the {case.talker(streams[0])} began anew {times(len(restarts))} in mid-call, "
            f"first at {number(at)} s, with other numbers: receivers start again too, heard as a gap or a click.",
            stream=streams[-1].id,
            where=ENDPOINT,
            confidence_pct=85.0,
            from_s=at,
            to_s=case.seconds(restarts[-1]),
            at_least="concern",
        )
