"""The verdict on a call: one sentence for the ticket, three facts to go with it, and what to look at next."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.emodel.g109 import quality_band
from rtpaudit.findings.words import number, pct
from rtpaudit.report.clock import Clock, seconds_ns
from rtpaudit.report.plain import Row
from rtpaudit.report.plots import WINDOW_S
from rtpaudit.units import NS_PER_S, percent

GOOD_R, FAIR_R = 80.0, 70.0
"""lower edges of the bands high and medium. ITU-T G.109 (09/1999), table 1"""
WORTH_TELLING_R = 3.0
"""a passage this far below the rest is worth a word (common practice)"""

SEVERITIES = ("remark", "concern", "fault")

PLACES = {
    "before capture point": "Before the capture point: it was so already when the packets passed it",
    "after capture point": "After the capture point: nothing of it shows where the packets passed",
    "endpoint": "In one of the two devices, not in the network between them",
    "capture": "In the capture itself: the call may have been better than it looks",
    "unknown": "This capture alone does not tell where",
}


@dataclass(frozen=True, slots=True)
class Verdict:
    """What a reader sees first."""

    sentence: str
    ratings: str
    worst: str
    """the worst passage, or that there is none"""
    where: str
    check_next: str


@dataclass(frozen=True, slots=True)
class Passage:
    """Two seconds at one ear."""

    begin_ns: int
    R: float
    ear: str


def verdict(call: AssessedCall, findings: Sequence[Row], clock: Clock) -> Verdict:
    """The verdict on a call; ``findings`` are its own, the gravest first."""
    chief = next((one for one in findings if one["finding"] == call.headline and call.headline), None)
    return Verdict(
        sentence=chief["says"] if chief else own_sentence(call),
        ratings=_ratings(call),
        worst=_worst(call, clock),
        where=PLACES.get(chief["where"] or "", "") if chief else "",
        check_next=(chief["check_next"] or "") if chief else "",
    )


def own_sentence(call: AssessedCall) -> str:
    """What the figures say of a call where no finding explains it."""
    if not call.streams:
        return _without_sound(call)
    rated = [R for R in (call.figures.caller_hears_r, call.figures.callee_hears_r) if not math.isnan(R)]
    if not rated:
        return f"What was heard in this call cannot be rated: {_reason(call.streams)}."
    worst = min(rated)
    if worst >= GOOD_R:
        if len(rated) == 2:
            return "Both sides heard each other well."
        ear = "caller" if not math.isnan(call.figures.caller_hears_r) else "callee"
        return f"The {ear} heard the other side well; the other direction cannot be rated."
    ears = [ear for ear, R in _ears(call) if R == worst]
    who = f"The {ears[0]}" if len(ears) == 1 else "Each side"
    how = "somewhat impaired" if worst >= FAIR_R else "poor" if worst >= 50.0 else "very poor"
    why = _losses(call.from_callee if ears[0] == "caller" else call.from_caller)
    return f"{who} heard {how} speech{why}."


def gravest_first(findings: Sequence[Row], headline: str) -> list[Row]:
    """Findings by how grave they are, then by what they cost; the headline leads."""

    def place(row: Row) -> tuple[bool, int, float]:
        grave = SEVERITIES.index(row["severity"]) if row["severity"] in SEVERITIES else -1
        return row["finding"] != headline, -grave, -(row["r_points"] or 0.0)

    return sorted(findings, key=place)


def _without_sound(call: AssessedCall) -> str:
    if call.outcome == "answered":
        return "The call was answered, and no audio of it was captured."
    status = f": status {call.status_code}" if call.status_code else ""
    words = {
        "cancelled": "The caller gave up before anybody answered",
        "refused": "The callee did not take the call",
        "failed": "The call could not be set up",
        "no reply": "Nobody replied to the call",
    }
    return f"{words.get(call.outcome, 'No audio of this call was captured')}{status}."


def _reason(streams: Sequence[AssessedStream]) -> str:
    notes = dict.fromkeys(one.figures.rating_note for one in streams if one.figures.rating_note)
    return "; ".join(notes) or "nothing tells how it was coded"


def _ears(call: AssessedCall) -> list[tuple[str, float]]:
    return [("caller", call.figures.caller_hears_r), ("callee", call.figures.callee_hears_r)]


def _losses(streams: Sequence[AssessedStream]) -> str:
    expected = sum(one.figures.packets_expected for one in streams)
    lost = percent(sum(one.figures.packets_lost for one in streams), expected)
    late = percent(sum(one.figures.packets_discarded or 0 for one in streams), expected)
    told = [
        f"{pct(share)} of the packets {what}"
        for share, what in ((lost, "were lost"), (late, "came too late"))
        if share > 0
    ]
    return f": {' and '.join(told)}" if told else ""


def _ratings(call: AssessedCall) -> str:
    told = [f"{ear} R {number(R)}, {quality_band(R)}" for ear, R in _ears(call) if not math.isnan(R)]
    return "; ".join(told) or "not rated"


def _worst(call: AssessedCall, clock: Clock) -> str:
    passages = [
        one for side in (("caller", call.from_callee), ("callee", call.from_caller)) for one in _passages(*side)
    ]
    if not passages:
        return "not rated"
    worst = min(passages, key=lambda one: one.R)
    whole = max((R for _, R in _ears(call) if not math.isnan(R)), default=math.nan)
    if not worst.R < whole - WORTH_TELLING_R:
        return "none: even from beginning to end"
    until = clock.time_of_day(worst.begin_ns + seconds_ns(WINDOW_S))
    return f"{clock.time_of_day(worst.begin_ns)} to {until}, R {number(worst.R)} at the {worst.ear}’s ear"


def _passages(ear: str, streams: Sequence[AssessedStream]) -> list[Passage]:
    """The worst passage of each stream."""
    found = []
    for one in streams:
        R = one.windows.r_factor
        if len(R) and not np.isnan(R).all():
            worst = int(np.nanargmin(R))
            begin_ns = one.started_ns + round(float(one.windows.from_s[worst]) * NS_PER_S)
            found.append(Passage(begin_ns, float(R[worst]), ear))
    return found
