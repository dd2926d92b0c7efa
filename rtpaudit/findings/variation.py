"""Rules about delay that varies, and about the buffer that has to even it out."""

from collections.abc import Iterator

import numpy as np

from rtpaudit.findings.case import Case
from rtpaudit.findings.excursions import Excursions, excursions, is_calm
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.pacing import pacing_of
from rtpaudit.findings.patterns import Rhythm, rhythm
from rtpaudit.findings.rule import BEFORE, COMMON_PRACTICE, Evidence, rule
from rtpaudit.findings.share import claim
from rtpaudit.findings.words import many, ms, number, times

Y1541 = "ITU-T Y.1541, delay variation of classes 0 and 1"
SHORTEST_PERIOD_S = 0.5
CALM_MS = 50.0
"""delay variation that a calm network may have: ITU-T Y.1541, classes 0 and 1"""
HOLE_MS = 60.0
"""beyond it concealment has faded to silence. ITU-T G.711 Appendix I"""


@rule(
    "delay-spike", group="network", limit=50.0, unit="ms", basis=Y1541,
    means="Delay jumped up for a moment and came down again, while the rest of the call was calm: something held "
    "the packets back and then let them go.",
    measured_as="highest delay above a slow base line, in passages that leave the usual spread fivefold",
    check_next="Look for what held up this way at these times: a radio retry or cell change, a routing change, a "
    "busy link or host.",
)  # fmt: skip
def delay_spike(case: Case, limit: float) -> Iterator[Evidence]:
    """Delay that jumps up for a moment."""
    for facts in case.streams:
        if is_calm(facts, limit):
            continue
        found = excursions(facts, limit)
        if not len(found.peak_ms) or _beat(found) or pacing_of(facts) or not _rare(found):
            continue
        late = _late_in(facts, found)
        peak = float(found.peak_ms.max())
        hole = facts.packet_time_ms * len(late) / len(found.peak_ms)
        yield Evidence(
            measured=peak,
            says=f"Delay to the {case.listener(facts)} jumped up {times(len(found.peak_ms))}, by {ms(peak)} "
            f"at the most, while the rest of the stream was calm: {_heard(late)}.",
            stream=facts.id,
            where=BEFORE,
            confidence_pct=90.0,
            from_s=case.seconds(facts.assessed.started_ns) + float(found.from_s[0]),
            to_s=case.seconds(facts.assessed.started_ns) + float(found.to_s[-1]),
            claims=[claim(facts, late, 0.9)],
            at_least="concern" if hole >= HOLE_MS else "remark",
        )


@rule(
    "periodic-delay", group="network", limit=20.0, unit="ms", basis=COMMON_PRACTICE,
    means="Delay jumped up at regular intervals: something that runs by a clock holds the packets up.",
    measured_as="median height of jumps above a slow base line that lie on a regular grid of half a second and more",
    check_next="Look for what runs on this way with this very period: scans of a radio, routing timers, backups, "
    "polls.",
)  # fmt: skip
def periodic_delay(case: Case, limit: float) -> Iterator[Evidence]:
    """Delay that jumps up by the clock."""
    for facts in case.streams:
        if is_calm(facts, limit):
            continue
        found = excursions(facts, limit)
        beat = _beat(found)
        if beat is None or pacing_of(facts):
            continue
        late = _late_in(facts, found)
        height = float(np.median(found.peak_ms))
        yield Evidence(
            measured=height,
            says=f"Delay to the {case.listener(facts)} jumped up by about {ms(height)} every {number(beat.period_s)} s "
            f"({beat.events} times): {_heard(late)}.",
            stream=facts.id,
            where=BEFORE,
            confidence_pct=min(95.0, 70.0 + 4.0 * beat.events),
            from_s=case.seconds(facts.assessed.started_ns) + float(found.from_s[0]),
            to_s=case.seconds(facts.assessed.started_ns) + float(found.to_s[-1]),
            claims=[claim(facts, late, 0.95)],
            at_least="concern" if height >= 50.0 else "remark",
        )


def _beat(found: Excursions) -> Rhythm | None:
    """The period of excursions, None where they have none."""
    return rhythm(found.from_s, SHORTEST_PERIOD_S)


def _rare(found: Excursions) -> bool:
    """Whether excursions are moments in a stream that is calm otherwise."""
    outside = found.above_ms[found.event_of < 0]
    return len(outside) > 0.75 * len(found.above_ms) and float(np.percentile(outside, 95)) <= CALM_MS


def _late_in(facts: StreamFacts, found: Excursions) -> np.ndarray:
    """Late items that lie in excursions."""
    inside = np.zeros(len(facts.packets), np.bool_)
    inside[facts.timed.row[found.event_of >= 0]] = True
    return facts.late_items[inside[facts.late_rows]]


def _heard(late: np.ndarray) -> str:
    if not len(late):
        return "the playout buffer bridged it"
    return f"{many(len(late), 'packet')} came too late for playout, heard as a gap or a jump in the speech"
