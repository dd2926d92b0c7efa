"""Rules about how sound was coded on its way: law, signalling bits, slips, a second coding, digits, cut beginnings."""

from collections.abc import Iterator

import numpy as np

from rtpaudit.audio.law import Law
from rtpaudit.findings.case import Case
from rtpaudit.findings.rule import COMMON_PRACTICE, ENDPOINT, UNKNOWN, Evidence, rule
from rtpaudit.findings.words import many, seconds, times
from rtpaudit.units import NS_PER_S

SURE_PCT = 60.0
DIGIT_SLACK_S = 0.4
"""by which tone and event of one key press may lie apart: a leak comes before its event is told from speech"""


@rule(
    "wrong-law", group="sound", limit=SURE_PCT, unit="%", basis="ITU-T G.711",
    means="A-law octets are decoded as mu-law, or the reverse: speech is distorted, very loud and noisy, but can be "
    "followed.",
    measured_as="confidence that the samples, read by the other law, predict each other better",
    check_next="Compare the encodings that both sides agreed on with what this sender is set to, and look at "
    "gateways between.",
    severity="a fault",
)  # fmt: skip
def wrong_law(case: Case, limit: float) -> Iterator[Evidence]:
    """The wrong law of G.711."""
    for facts in case.streams:
        sound = facts.assessed.sound
        law = sound.law if sound is not None else None
        if law is None or law.law not in (Law.PCMA_AS_PCMU, Law.PCMU_AS_PCMA) or law.confidence_pct < limit:
            continue
        yield Evidence(
            measured=law.confidence_pct,
            says=f"The sound of the {case.talker(facts)} is {law.law.value}: the {case.listener(facts)} heard it "
            "distorted and loud.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=law.confidence_pct,
            at_least="fault",
            gravity=80.0,
        )


@rule(
    "robbed-bits", group="sound", limit=50.0, unit="%", basis="common practice of T1 trunks (RFC 4733, 3.14, for "
    "its frames)",
    means="The low bit of every sixth sample carries signalling instead of sound: the call went over a trunk with "
    "robbed-bit signalling. It adds a little noise, and spoils fax and modems.",
    measured_as="share of passages in which the low bit of every sixth octet is not that of speech",
    check_next="Look at the trunks on this way: a common signalling channel would leave all bits to the sound.",
    severity="a concern",
)  # fmt: skip
def robbed_bits(case: Case, limit: float) -> Iterator[Evidence]:
    """Signalling in place of the low bit."""
    for facts in case.streams:
        signs = facts.assessed.signs
        found = signs.robbed_bits if signs is not None else None
        if found is None or found.share_pct < limit or found.confidence_pct < SURE_PCT:
            continue
        yield Evidence(
            measured=found.share_pct,
            says=f"Signalling bits stand in the sound of the {case.talker(facts)}, in every sixth sample: it went over "
            f"{many(found.trunks, 'trunk')} with robbed-bit signalling.",
            stream=facts.id,
            where=UNKNOWN,
            confidence_pct=found.confidence_pct,
            at_least="concern",
            at_most="concern",
            gravity=8.0,
        )


@rule(
    "clock-slips", group="sound", limit=2, unit="slips", basis="ITU-T G.822, from an encyclopaedia",
    means="Samples are repeated or dropped at intervals, heard as clicks: two devices on the way run on clocks of "
    "their own.",
    measured_as="places at which the sound repeats or skips samples, and the interval between them",
    check_next="Compare the clock sources of the gateways and trunks on this way; all should follow one.",
    severity="a concern, a fault from one slip in ten seconds",
)  # fmt: skip
def clock_slips(case: Case, limit: float) -> Iterator[Evidence]:
    """Samples repeated or dropped."""
    for facts in case.streams:
        sound = facts.assessed.sound
        found = sound.slips if sound is not None else None
        if found is None or found.confidence_pct < SURE_PCT:
            continue
        count = found.repeated + found.dropped + found.repeated_frames
        if count < limit:
            continue
        often = np.isfinite(found.interval_s) and found.interval_s <= 10.0
        yield Evidence(
            measured=count,
            says=f"Samples of the {case.talker(facts)} are repeated or missing {times(count)}, about every "
            f"{seconds(found.interval_s)}{', as regularly as two clocks drift apart' if found.regular else ''}: "
            "heard as clicks.",
            stream=facts.id,
            where=UNKNOWN,
            confidence_pct=found.confidence_pct,
            at_least="fault" if often else "concern",
            gravity=12.0,
        )


@rule(
    "second-transcoding", group="call", limit=SURE_PCT, unit="%", basis=COMMON_PRACTICE,
    means="The sound was coded by another encoding before this one: each coding adds noise, and the rating knows "
    "the last only.",
    measured_as="confidence that sample values are missing which the other law of G.711 can never give",
    check_next="Look for a gateway that converts between encodings on this way, and whether both ends could agree "
    "on one.",
    severity="a concern",
)  # fmt: skip
def second_transcoding(case: Case, limit: float) -> Iterator[Evidence]:
    """Sound that was coded twice."""
    for facts in case.streams:
        sound = facts.assessed.sound
        found = sound.tandem if sound is not None else None
        if found is None or found.confidence_pct < limit:
            continue
        yield Evidence(
            measured=found.confidence_pct,
            says=f"The sound of the {case.talker(facts)} was coded as {found.law} before it was coded as "
            f"{facts.stream.encoding}: values that {found.law} never gives are missing.",
            stream=facts.id,
            where=UNKNOWN,
            confidence_pct=found.confidence_pct,
            at_least="concern",
            at_most="concern",
            gravity=6.0,
        )


@rule(
    "speech-start-clipped", group="endpoint", limit=50.0, unit="%", basis=COMMON_PRACTICE,
    means="Silence suppression opens too late, so that first syllables are cut off.",
    measured_as="share of talkspurts, each after a pause in which nothing was sent, that are in full swing in their "
    "first 5 ms",
    check_next="Lower the threshold of the sender's voice activity detection, or switch it off.",
    severity="a concern",
)  # fmt: skip
def speech_start_clipped(case: Case, limit: float) -> Iterator[Evidence]:
    """Beginnings of speech cut off."""
    for facts in case.streams:
        sound = facts.assessed.sound
        found = sound.onsets if sound is not None else None
        # Tones of keys begin in full swing by right.
        if found is None or sound is None or not found.cut_pct >= limit or len(sound.digits) >= found.cut / 2:
            continue
        yield Evidence(
            measured=found.cut_pct,
            says=f"{found.cut} of {many(found.talkspurts, 'talkspurt')} of the {case.talker(facts)} begin in the "
            "middle of a sound: its silence suppression cuts off first syllables.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=min(90.0, 55.0 + 3.0 * found.talkspurts),
            at_least="concern",
            at_most="concern",
            gravity=10.0,
        )


@rule(
    "digits-twice", group="endpoint", limit=1, unit="digits", basis="RFC 4733, 1.2 and 2.6",
    means="Digits go as telephone events and are also to be heard: the other side may count them twice.",
    measured_as="telephone events of a stream beside which its sound holds the two tones of a key",
    check_next="Look at the sender's setting for digits, and at gateways that make events of tones without taking "
    "the tones out.",
    severity="a concern",
)  # fmt: skip
def digits_twice(case: Case, limit: float) -> Iterator[Evidence]:
    """Digits as events and as tones."""
    for facts in case.streams:
        sound = facts.assessed.sound
        if sound is None or not sound.digits:
            continue
        events = [row for row in case.whole.events_of(facts) if row.digit]
        begin = np.array([sound.origin_ns + one.from_s * NS_PER_S for one in sound.digits])
        end = np.array([sound.origin_ns + one.to_s * NS_PER_S for one in sound.digits])
        slack = DIGIT_SLACK_S * NS_PER_S
        twice = [row for row in events if ((begin <= row.time_ns + slack) & (end >= row.time_ns - slack)).any()]
        if len(twice) < limit:
            continue
        yield Evidence(
            measured=len(twice),
            says=f"{len(twice)} of {many(len(events), 'digit')} that the {case.talker(facts)} sent as events are to "
            "be heard as tones too: the other side may count them twice.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=90.0,
            from_s=case.seconds(min(row.time_ns for row in twice)),
            to_s=case.seconds(max(row.time_ns for row in twice)),
            at_least="concern",
            at_most="concern",
            gravity=10.0,
        )
