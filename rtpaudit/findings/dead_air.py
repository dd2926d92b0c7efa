"""The rule about packets without sound: a side silent all along, a line that goes dead, a side that goes mute."""

from collections.abc import Iterator

import numpy as np

from rtpaudit.assess.hearing import StreamSound
from rtpaudit.assess.pairs import CallSound
from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts, is_cut
from rtpaudit.findings.numbering import keeps_no_time
from rtpaudit.findings.rule import COMMON_PRACTICE, ENDPOINT, UNKNOWN, Evidence, rule
from rtpaudit.findings.sound import sounds_of
from rtpaudit.findings.words import seconds, times
from rtpaudit.units import NS_PER_S

MOSTLY_PCT = 80.0
EDGE_S = 1.0
IDLE_PEAK = 8
"""of digital silence: A-law has no zero"""
SOMETIMES = 0.05
"""of the other sound that may be digital silence as well, where it is no habit of the stream"""
DEAD_DBOV = -68.0
"""of a whole stream: A-law's own silence is at -72 dBov"""


@rule(
    "dead-air", group="sound", limit=5.0, unit="s", basis=COMMON_PRACTICE,
    means="Packets came, and there was nothing in them: a side was muted, its microphone dead, or something on the way "
    "replaced its sound by silence.",
    measured_as="time in which neither side had any sound (below -65 dBov), in which one side fell from its usual "
    "noise to digital silence, or the whole stream where it never had any",
    check_next="Ask whether somebody had muted or was on hold; otherwise look at the microphone, and at what "
    "bridges the call.",
    severity="a fault where a side was silent all along or both fell silent in mid-call, a concern where one side did, "
    "a remark where both were silent before the first words or after the last",
)  # fmt: skip
def dead_air(case: Case, limit: float) -> Iterator[Evidence]:
    """Packets without sound."""
    silent = [facts for facts, sound in sounds_of(case) if _never_sounds(facts, sound) and not is_cut(facts)]
    for facts in silent:
        if facts.duration_s < limit:
            continue
        yield Evidence(
            measured=facts.duration_s,
            says=f"The {case.listener(facts)} heard nothing: all {seconds(facts.duration_s)} of packets from the "
            f"{case.talker(facts)} hold silence.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=90.0,
            at_least="fault",
            gravity=85.0,
        )
    if silent:
        return
    talk = case.call.sound
    both = [] if talk is None else _dead_together(case, talk, limit)
    if both and talk is not None:
        origin = case.seconds(talk.from_ns)
        inside = [one for one in both if not _at_an_end(talk, case, *one)]
        longest = max(end - begin for begin, end in inside or both)
        yield Evidence(
            measured=longest,
            says=f"Neither side had any sound {times(len(both))}, for {seconds(longest)} at the longest: the line "
            "was dead.",
            where=UNKNOWN,
            confidence_pct=75.0,
            from_s=origin + both[0][0],
            to_s=origin + both[-1][1],
            at_least="fault" if inside else "remark",
            at_most="fault" if inside else "remark",
            gravity=40.0,
        )
        return
    for facts, sound in sounds_of(case):
        silences = [] if is_cut(facts) else _mute_passages(sound, limit)
        # Who falls silent each time the other speaks has a gate, and is not dead.
        silences = silences if len(silences) == 1 else []
        mute = [piece for one in silences for piece in _off_hold(case, sound.origin_ns, *one, limit)]
        if mute:
            longest = max(end - begin for begin, end in mute)
            yield Evidence(
                measured=longest,
                says=f"The sound of the {case.talker(facts)} fell silent {times(len(mute))}, without even the noise it "
                f"has otherwise, for {seconds(longest)} at the longest.",
                stream=facts.id,
                where=ENDPOINT,
                confidence_pct=60.0,
                from_s=case.seconds(sound.origin_ns) + mute[0][0],
                to_s=case.seconds(sound.origin_ns) + mute[-1][1],
                at_least="concern",
                at_most="concern",
                gravity=15.0,
            )


def _never_sounds(facts: StreamFacts, sound: StreamSound) -> bool:
    """Whether a stream holds nothing but silence from its first packet to its last."""
    signs = facts.assessed.signs
    idle = signs.idle if signs is not None else None
    return (idle is not None and idle.whole_call) or sound.level.long_term_dbov < DEAD_DBOV


def _mute_passages(sound: StreamSound, least_s: float) -> list[tuple[float, float]]:
    """Begin and end of passages of digital silence in packets, where the stream has noise otherwise. [s]"""
    scanned = sound.scanned
    block_s = scanned.block_samples / scanned.sampling_rate_hz
    mute = np.concatenate([[False], (scanned.received > 0) & (scanned.peak <= IDLE_PEAK), [False]])
    edges = np.flatnonzero(np.diff(mute.astype(np.int8)))
    begin, end = edges[::2] * block_s, edges[1::2] * block_s
    lasts = end - begin >= least_s
    elsewhere = mute.sum() * block_s - float((end - begin)[lasts].sum())
    sounding = len(mute) * block_s - float((end - begin)[lasts].sum())
    if elsewhere > SOMETIMES * sounding:
        return []
    return list(zip(begin[lasts].tolist(), end[lasts].tolist(), strict=True))


def _dead_together(case: Case, sound: CallSound, least_s: float) -> list[tuple[float, float]]:
    """Begin and end of passages of the talk in which neither side had any sound though packets came. [s]"""
    # The sound of a call is that of the longest stream either way: what others said is not in it.
    if any(is_cut(facts) or keeps_no_time(facts) for facts in case.streams) or max(map(len, case.directions)) > 1:
        return []
    answered = case.call.started_ns if case.call.answered_ns is None else case.call.answered_ns
    found = []
    for one in sound.dead_air:
        begin, end = (sound.from_ns + round(at * NS_PER_S) for at in (one.from_s, one.to_s))
        if one.received_pct >= MOSTLY_PCT and begin >= answered and end <= case.heard_until_ns + NS_PER_S:
            found += _off_hold(case, sound.from_ns, one.from_s, one.to_s, least_s)
    return found


def _at_an_end(talk: CallSound, case: Case, from_s: float, to_s: float) -> bool:
    """Whether a passage lies before the first words or after the last ones: people wait, and leave."""
    last_s = (max(facts.assessed.ended_ns for facts in case.streams) - talk.from_ns) / NS_PER_S
    return from_s < EDGE_S or to_s > last_s - EDGE_S


def _off_hold(case: Case, origin_ns: int, from_s: float, to_s: float, least_s: float) -> list[tuple[float, float]]:
    """What is left of a passage outside the times that the signalling says were spent on hold, as far as it lasts."""
    left, begin_s = [], from_s
    for hold in sorted(case.call.signalled.holds if case.call.signalled else (), key=lambda one: one.from_ns):
        until_ns = case.call.ended_ns if hold.until_ns is None else hold.until_ns
        held_s, resumed_s = ((at - origin_ns) / NS_PER_S for at in (hold.from_ns, until_ns))
        left.append((begin_s, min(to_s, max(held_s, begin_s))))
        begin_s = min(to_s, max(resumed_s, begin_s))
    return [(begin, end) for begin, end in [*left, (begin_s, to_s)] if end - begin >= least_s]
