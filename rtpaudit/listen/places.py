"""Places of an audit that are worth a clip: the worst by windows and findings, and sound ones as anchors."""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.hearing import StreamSound
from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.emodel.g107 import effective_equipment_impairment
from rtpaudit.units import NS_PER_S

if TYPE_CHECKING:
    from pandas import DataFrame

Values = NDArray[np.float64]
Rows = Sequence[Mapping[str, Any]]

WORST, ANCHOR = "worst", "anchor"
WINDOW_S = 2.0
SPEAKS_PCT = 20.0
"""activity of a window from which on somebody speaks in it: a loss in a pause is not heard (common practice)"""

# What packets tell is in the windows already, and levels are evened out: these are heard in a clip and not seen there.
OF_THE_SOUND = frozenset(
    {"clipping", "noise", "hum", "wrong-law", "robbed-bits", "clock-slips", "packet-time-wrong", "second-transcoding"}
)
AS_IF_R = {"fault": 50.0, "concern": 75.0}
"""where the rating is blind to a finding (common practice)"""
SOUND_R = 80.0
"""lower edge of the band high. ITU-T G.109 (09/1999), table 1"""
AS_IF_BPL = 25.1
"""concealed G.711 stands in where an encoding has no rating: only for the order of places"""


@dataclass(frozen=True, slots=True)
class Place:
    """Seconds of one stream's sound."""

    call: AssessedCall
    one: AssessedStream
    sound: StreamSound
    begin_s: float
    """on the timeline of the sound"""
    kind: str
    reason: str
    R: float
    """by which places are put in order"""

    @property
    def end_s(self) -> float:
        """Where it ends. [s]"""
        return self.begin_s + WINDOW_S


@dataclass(frozen=True, slots=True)
class _Windows:
    """The windows of one stream with sound."""

    call: AssessedCall
    one: AssessedStream
    sound: StreamSound
    findings: Rows
    missing: NDArray[np.int64]
    """lost and late packets"""
    R: Values

    def begins(self) -> Values:
        """Where the windows begin on the timeline of the sound. [s]"""
        return (self.one.started_ns - self.sound.origin_ns) / NS_PER_S + self.one.windows.from_s

    def speaking(self) -> NDArray[np.bool_]:
        """Windows in which somebody speaks, and no ringing, fax or test tone sounds."""
        begins, speaks = self.begins(), self.one.windows.activity_pct >= SPEAKS_PCT
        tones = [(one.from_s, one.to_s) for one in self.sound.tones]
        for begin, end in tones + [(one.from_s, one.to_s) for one in self.sound.steady_tones]:
            speaks &= (begin >= begins + WINDOW_S) | (end <= begins)
        return np.asarray(speaks)

    def liveliest(self, fit: NDArray[np.bool_], most: int) -> list[int]:
        """Of some windows those with most speech."""
        rows = np.flatnonzero(fit & self.speaking())
        order = np.argsort(-self.one.windows.activity_pct[rows], kind="stable")
        return [int(k) for k in rows[order][:most]]

    def under(self, finding: Mapping[str, Any]) -> NDArray[np.bool_]:
        """Windows that a finding covers; all where it holds throughout."""
        at_s = (self.one.started_ns - self.call.started_ns) / NS_PER_S + self.one.windows.from_s
        return np.asarray(~(finding["from_s"] > at_s + WINDOW_S) & ~(finding["to_s"] < at_s))

    def place(self, k: int, kind: str, reason: str, R: float) -> Place:
        """A window as a place on the timeline of the sound."""
        return Place(self.call, self.one, self.sound, float(self.begins()[k]), kind, reason, R)


def worst_places(calls: Sequence[AssessedCall], findings: "DataFrame", most: int) -> list[Place]:
    """Impaired places with speech, the worst first; at most ``most`` of each stream."""
    found: list[Place] = []
    for windows in _all_windows(calls, findings):
        mine = [*_impaired(windows), *_found_in_the_sound(windows)]
        found += sorted(mine, key=lambda place: place.R)[:most]
    return sorted(found, key=lambda place: place.R)


def anchor_places(calls: Sequence[AssessedCall], findings: "DataFrame", most: int, clip_s: float) -> list[Place]:
    """Lively places without anything lost or late near them, the best first; at most ``most`` of each stream."""
    found: list[Place] = []
    reach = math.ceil(clip_s / WINDOW_S)
    for windows in _all_windows(calls, findings):
        if any(row["finding"] in OF_THE_SOUND for row in windows.findings):
            continue
        clean = np.convolve(windows.missing > 0, np.ones(2 * reach + 1))[reach:-reach] == 0
        rows = windows.liveliest(clean & ~(windows.R < SOUND_R), most)
        found += [windows.place(k, ANCHOR, "nothing lost or late", float(windows.R[k])) for k in rows]
    return sorted(found, key=lambda place: -place.R)


def _all_windows(calls: Sequence[AssessedCall], findings: "DataFrame") -> Iterator[_Windows]:
    told: dict[str, list[Mapping[str, Any]]] = {}
    for row in findings.to_dict("records"):
        if isinstance(row["stream"], str) and row["severity"] in AS_IF_R:
            told.setdefault(row["stream"], []).append(row)
    for call in calls:
        for one in call.streams:
            if one.sound is not None and len(one.windows.from_s):
                late = one.windows.packets_discarded
                missing = one.windows.packets_lost if late is None else one.windows.packets_lost + late
                yield _Windows(call, one, one.sound, told.get(one.id, []), missing, _rank(one, missing))


def _rank(one: AssessedStream, missing: NDArray[np.int64]) -> Values:
    """R of each window; where the encoding has no rating, what its losses would make of G.711."""
    windows = one.windows
    if not np.isnan(windows.r_factor).all():
        return windows.r_factor
    share = 100.0 * missing / np.maximum(windows.packets_expected, 1)
    return 93.2 - effective_equipment_impairment(0.0, AS_IF_BPL, np.clip(share, 0.0, 100.0))


def _impaired(windows: _Windows) -> Iterator[Place]:
    """Windows of speech in which packets are missing, with the findings that cost most there as the reason."""
    costly = sorted((row for row in windows.findings if row["r_points"] > 0.0), key=lambda row: -row["r_points"])
    covered = [(str(row["finding"]), windows.under(row)) for row in costly]
    for k in np.flatnonzero((windows.missing > 0) & windows.speaking()).tolist():
        names = dict.fromkeys(name for name, under in covered if under[k])
        yield windows.place(k, WORST, " and ".join(list(names)[:2]) or "packets lost or late", float(windows.R[k]))


def _found_in_the_sound(windows: _Windows) -> Iterator[Place]:
    """Findings about the sound itself, each at the liveliest window that it covers."""
    for row in windows.findings:
        if row["finding"] in OF_THE_SOUND:
            for k in windows.liveliest(windows.under(row), 1):
                yield windows.place(k, WORST, str(row["finding"]), AS_IF_R[row["severity"]])
