"""One call as the page shows it: plain values, section by section, ready for JSON."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field
from typing import TYPE_CHECKING, Any

from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.profile import Playout
from rtpaudit.report.clock import Clock
from rtpaudit.report.ears import ears
from rtpaudit.report.plain import Row, rows, rows_by_call
from rtpaudit.report.plots import Detail, lanes
from rtpaudit.report.sounds import Sounds
from rtpaudit.report.verdict import gravest_first, verdict
from rtpaudit.units import NS_PER_MS

if TYPE_CHECKING:
    from pandas import DataFrame

TOLD_OF_MESSAGES = ("time", "from", "to", "message", "line", "transport", "repeated")
TOLD_OF_EVENTS = ("stream", "time", "event", "digit", "duration_ms", "carried_as")
TOLD_OF_REPORTS = (
    "stream", "time", "report", "loss_pct", "captured_loss_pct", "jitter_ms", "round_trip_ms", "set_aside",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Told:
    """Rows of the tables by call, as they may be shown."""

    calls: Mapping[str, Row]
    streams: Mapping[str, Row]
    findings: Mapping[str, list[Row]]
    signalling: Mapping[str, list[Row]]
    events: Mapping[str, list[Row]]
    reports: Mapping[str, list[Row]]
    legs: Mapping[str, list[str]] = field(default_factory=dict)
    """calls of each conversation"""

    @classmethod
    def of(cls, tables: Mapping[str, DataFrame]) -> Told:
        """Rows of all tables; private ones are private here too."""
        calls = {row["call"]: row for row in rows("calls", tables["calls"])}
        legs: dict[str, list[str]] = defaultdict(list)
        for name, row in calls.items():
            legs[row["conversation"]].append(name)
        return cls(
            calls=calls,
            streams={row["stream"]: row for row in rows("streams", tables["streams"])},
            findings={
                call: gravest_first(own, calls[call]["headline"] or "") if call else own
                for call, own in rows_by_call("findings", tables["findings"]).items()
            },
            signalling=rows_by_call("signalling", tables["signalling"]),
            events=rows_by_call("events", tables["events"]),
            reports=rows_by_call("reports", tables["reports"]),
            legs=legs,
        )

    def findings_of(self, call: str) -> list[Row]:
        """Findings of a call in the order in which they are numbered."""
        return self.findings.get(call, [])


def call_view(
    call: AssessedCall, told: Told, clock: Clock, sounds: Sounds, settings: Playout, detail: Detail
) -> dict[str, Any]:
    """Everything that the page shows of a call."""
    findings = told.findings_of(call.id)
    return {
        "id": call.id,
        "begin_ms": call.started_ns / NS_PER_MS,
        "ahead_s": clock.ahead_s(call.started_ns),
        "zone": clock.name(call.started_ns),
        "facts": told.calls[call.id],
        "legs": [leg for leg in told.legs.get(told.calls[call.id]["conversation"], []) if leg != call.id],
        "verdict": asdict(verdict(call, findings, clock)),
        "findings": findings,
        "ears": ears(call, findings, settings),
        "streams": [_stream(one, call, told, sounds, detail) for one in call.streams],
        "both": sounds.both(call),
        "holds": _holds(call),
        "messages": _some(told.signalling.get(call.id, []), TOLD_OF_MESSAGES, call, detail.rows),
        "events": _some(told.events.get(call.id, []), TOLD_OF_EVENTS, call, detail.rows),
        "reports": _some(told.reports.get(call.id, []), TOLD_OF_REPORTS, call, detail.rows),
    }


def _stream(one: AssessedStream, call: AssessedCall, told: Told, sounds: Sounds, detail: Detail) -> dict[str, Any]:
    return {
        "id": one.id,
        "ear": "callee" if any(one is each for each in call.from_caller) else "caller",
        "facts": told.streams[one.id],
        "sound": sounds.of(one, call),
        **lanes(one, call.started_ns, detail),
    }


def _holds(call: AssessedCall) -> list[list[Any]]:
    """Begin, end [ms of the call] and side of each time on hold."""
    if call.signalled is None:
        return []
    return [
        [(hold.from_ns - call.started_ns) / NS_PER_MS,
         ((hold.until_ns or call.ended_ns) - call.started_ns) / NS_PER_MS, hold.side]
        for hold in call.signalled.holds
    ]  # fmt: skip


def _some(found: Sequence[Row], columns: Sequence[str], call: AssessedCall, most: int) -> dict[str, Any]:
    """Some columns of rows, the time as milliseconds of the call; of too many the first and the last."""
    shown = list(found) if len(found) <= most else [*found[: most // 2], *found[-(most // 2) :]]
    begin_ms = call.started_ns / NS_PER_MS
    kept = [{name: row[name] for name in columns} for row in shown]
    for row in kept:
        row["at"] = round(row.pop("time") - begin_ms, 1)
    return {"rows": kept, "in_all": len(found)}
