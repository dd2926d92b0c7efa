"""Audits of a piece of captures as the rows that the store keeps, each with its capture, its night and its route."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import tzinfo
from typing import TYPE_CHECKING, Any

import numpy as np

from rtpaudit.nightly.calendar import nights_of
from rtpaudit.nightly.names import hide_captures, hide_names
from rtpaudit.nightly.routing import Router, Way
from rtpaudit.nightly.schema import NIGHT, arrow_schema
from rtpaudit.nightly.settings import PRIVATE, AuditSettings
from rtpaudit.report.tables import Columns, build_frame, table_columns

if TYPE_CHECKING:
    import pyarrow as pa
    from pandas import DataFrame, Series

    from rtpaudit.assess.results import AssessedCall
    from rtpaudit.assess.rows import SignallingRow
    from rtpaudit.walk import Audit

_BY_STREAM = ("gaps", "windows")


@dataclass(slots=True)
class Facts:
    """One capture: a row of the captures table."""

    capture_id: str
    capture: str
    """base name"""
    status: str
    reason: str
    stratum: str
    octets: int
    fallback_ns: int
    """the moment whose night it belongs to where it holds no stream"""
    audit_s: float
    audited_ns: int
    rtpaudit: str
    started_ns: int | None = None
    packets: int = 0
    streams: int = 0
    calls: int = 0


@dataclass(slots=True)
class PieceRows:
    """Rows of the captures of one piece, added one by one and turned into tables together."""

    settings: AuditSettings
    zone: tzinfo | None
    router: Router = field(init=False)
    facts: list[Facts] = field(default_factory=list)
    _parts: dict[str, list[Columns]] = field(default_factory=lambda: defaultdict(list))
    _routes: list[Any] = field(default_factory=list)
    _owners: dict[str, list[int]] = field(default_factory=lambda: defaultdict(list))

    def __post_init__(self) -> None:
        self.router = Router(self.settings.profile.routes)

    def holds(self, capture: str) -> bool:
        """Whether a capture is among these, under whatever name."""
        return any(one.capture_id == capture for one in self.facts)

    def add(self, facts: Facts, audit: Audit | None) -> None:
        """One capture; without an audit where it failed."""
        if audit is None:
            self.facts.append(facts)
            return
        found = audit.assessment
        columns = table_columns(found, audit.diagnosis, found.messages, found.events, found.reports)
        routes = self._route_of(columns["calls"]["call"], audit)
        facts.packets = sum(columns["streams"]["packets_captured"])
        facts.streams, facts.calls = len(found.streams), len(found.calls)
        if facts.streams:
            facts.started_ns = min(one.started_ns for one in found.streams)
        self.facts.append(facts)
        self._routes += routes
        for name, part in columns.items():
            self._parts[name].append(part)
            self._owners[name].append(len(self.facts) - 1)

    def finish(self) -> dict[str, pa.Table]:
        """All tables of the piece."""
        import pandas as pd

        tables = {name: self._joined(name) for name in self._parts}
        tables["captures"] = _captures(self.facts)
        if "calls" in tables:
            tables["calls"]["route"] = pd.array([one or pd.NA for one in self._routes], dtype="string")
            tables["calls"]["discard_pct"] = _worst_discards(tables["calls"], tables["streams"])
            _place_in_nights(tables, self.zone)
            hidden = hide_names(tables, self.settings.names, self.settings.key, self.settings.digits)
        else:
            # All failed: nothing is known of who spoke.
            if self.settings.names == PRIVATE:
                hide_captures(tables["captures"])
            when = tables["captures"]["_when"].to_numpy(np.int64)
            hidden = {"captures": tables["captures"].assign(**{NIGHT: _nights(when, self.zone)})}
        mark = pd.array([self.settings.profile_mark], dtype="string")
        return {name: _arrow(name, frame.assign(profile=mark.repeat(len(frame)))) for name, frame in hidden.items()}

    def _joined(self, name: str) -> DataFrame:
        import pandas as pd

        frame = build_frame(name, self._parts[name])
        counts = [len(next(iter(one.values()))) for one in self._parts[name]]
        ids = pd.array([self.facts[owner].capture_id for owner in self._owners[name]], dtype="string")
        return frame.assign(capture_id=ids.repeat(counts), _owner=np.repeat(self._owners[name], counts))

    def _route_of(self, calls: Sequence[str], audit: Audit) -> list[str]:
        if not self.router.routes:
            return [""] * len(calls)
        said: dict[str, list[SignallingRow]] = defaultdict(list)
        for row in audit.assessment.messages:
            said[row.call].append(row)
        by_call = {call.id: self.router.route(_way(call, said[call.id])) for call in audit.assessment.calls}
        return [by_call[call] for call in calls]


def _way(call: AssessedCall, said: Sequence[SignallingRow]) -> Way:
    streams = call.from_caller + call.from_callee
    addresses = {address for one in streams for address in (one.stream.source, one.stream.destination)}
    addresses |= {end.rsplit(":", 1)[0].strip("[]") for row in said for end in (row.from_, row.to)}
    return Way(
        addresses=frozenset(addresses),
        numbers=(call.caller, call.callee),
        vlans=frozenset(int(one.stream.packets.vlan[0]) for one in streams if len(one.stream.packets)),
        signalling=tuple(row.line for row in said),
    )


def _captures(facts: Sequence[Facts]) -> DataFrame:
    import pandas as pd

    none = np.iinfo(np.int64).min
    started = np.array([none if one.started_ns is None else one.started_ns for one in facts], np.int64)
    text = ("capture_id", "capture", "status", "reason", "stratum", "rtpaudit")
    columns: dict[str, Any] = {
        name: pd.array([getattr(one, name) or pd.NA for one in facts], dtype="string") for name in text
    }
    columns |= {name: [getattr(one, name) for one in facts] for name in ("octets", "packets", "streams", "calls")}
    columns["audit_s"] = [one.audit_s for one in facts]
    columns["started"] = pd.DatetimeIndex(started.view("M8[ns]"), tz="UTC")
    columns["audited"] = pd.DatetimeIndex(np.array([one.audited_ns for one in facts], "M8[ns]"), tz="UTC")
    columns["_when"] = [one.fallback_ns if one.started_ns is None else one.started_ns for one in facts]
    return pd.DataFrame(columns)


def _worst_discards(calls: DataFrame, streams: DataFrame) -> Series:
    """Discards of the worse direction of each call."""
    worst = streams.groupby(["capture_id", "call"], dropna=True)["discard_pct"].max().rename("discard_pct")
    return calls[["capture_id", "call"]].merge(worst, "left", left_on=["capture_id", "call"], right_index=True)[
        "discard_pct"
    ]


def _place_in_nights(tables: dict[str, DataFrame], zone: tzinfo | None) -> None:
    """The night of every row: that of its call, else of its stream, else of its capture."""
    import pandas as pd

    when = tables["captures"]["_when"].to_numpy(np.int64)
    calls, streams = tables["calls"], tables["streams"]
    by_call = pd.Series(_ns(calls["started"]), index=pd.MultiIndex.from_frame(calls[["_owner", "call"]]))
    moments = {"captures": when, "calls": _ns(calls["started"])}
    moments["streams"] = _of(streams, "call", by_call, _ns(streams["started"]))
    by_stream = pd.Series(moments["streams"], index=pd.MultiIndex.from_frame(streams[["_owner", "stream"]]))
    for name, frame in tables.items():
        if name in _BY_STREAM:
            moments[name] = _of(frame, "stream", by_stream, when[frame["_owner"]])
        elif name not in moments:
            otherwise = when[frame["_owner"]]
            moments[name] = _of(frame, "call", by_call, otherwise) if "call" in frame else otherwise
    for name, frame in tables.items():
        tables[name] = frame.assign(**{NIGHT: _nights(moments[name], zone)})


def _of(frame: DataFrame, column: str, moments: Series, otherwise: Any) -> Any:
    """Moment of each row by its capture and the id in a column, ``otherwise`` where it has none."""
    import pandas as pd

    place = moments.index.get_indexer(pd.MultiIndex.from_frame(frame[["_owner", column]]))
    if not len(moments):
        return otherwise
    return np.where(place >= 0, moments.to_numpy(np.int64)[place], otherwise)


def _ns(times: Series) -> Any:
    return times.dt.tz_localize(None).to_numpy("M8[ns]").view(np.int64)


def _nights(moments: Any, zone: tzinfo | None) -> Any:
    nights, place = nights_of(np.asarray(moments, np.int64), zone)
    return np.array(nights, "M8[D]")[place] if nights else np.empty(0, "M8[D]")


def _arrow(name: str, frame: DataFrame) -> pa.Table:
    import pyarrow as pa

    schema = arrow_schema(name, with_night=True)
    columns = [
        pa.array(frame[NIGHT].to_numpy("M8[D]")) if one.name == NIGHT else _cells(frame[one.name], one.type)
        for one in schema
    ]
    return pa.Table.from_arrays(columns, schema=schema)


def _cells(series: Series, kind: Any) -> Any:
    import pyarrow as pa

    made = pa.array(series.array, type=kind if not pa.types.is_floating(kind) else None, from_pandas=True)
    if isinstance(made, pa.ChunkedArray):
        made = made.combine_chunks()
    return made.cast(kind)
