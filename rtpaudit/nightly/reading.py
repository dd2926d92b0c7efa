"""A night read back from the store: calls with what they stand for, their streams, findings and captures."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING, Any

import numpy as np

from rtpaudit.nightly.journal import DONE
from rtpaudit.nightly.schema import arrow_schema
from rtpaudit.nightly.store import Store

if TYPE_CHECKING:
    from pandas import DataFrame

# What the figures need; the rest stays on the disk.
_COLUMNS: dict[str, tuple[str, ...]] = {
    "captures": ("capture_id", "profile", "capture", "status", "reason", "stratum", "octets", "audited", "packets"),
    "calls": (
        *("capture_id", "profile", "call", "capture", "caller", "callee", "started", "ended", "outcome"),
        *("status_code", "setup_delay_s", "encoding", "r_factor", "quality_band", "loss_pct", "discard_pct"),
        *("jitter_ms", "one_way_delay_ms", "headline", "route"),
    ),
    "streams": ("capture_id", "profile", "call", "source", "destination", "r_factor", "loss_pct"),
    "findings": ("capture_id", "profile", "call", "finding", "severity"),
}
REMARK = "remark"


@dataclass(slots=True)
class Night:
    """What the store holds of one night."""

    night: date
    captures: "DataFrame"
    calls: "DataFrame"
    """with ``weight``: how many calls each stands for"""
    streams: "DataFrame"
    findings: "DataFrame"
    """each kind once a call, remarks left out"""
    populations: Mapping[str, int]
    """captures that each stratum held; empty where no sample was drawn"""

    @property
    def sampled(self) -> bool:
        """Whether the night is known by a sample."""
        return bool(self.populations)

    @property
    def population(self) -> int:
        """Captures that the night stands for."""
        unsampled = int(self.captures["stratum"].isna().sum())
        return sum(self.populations.values()) + unsampled


def read_night(store: Store, night: date) -> Night:
    """One night; of a capture that was audited with several profiles only the latest audit counts."""
    captures = _read(store, "captures", night)
    captures = captures.drop_duplicates("capture_id", keep="last").reset_index(drop=True)
    calls = _of_latest(_read(store, "calls", night), store.known.current)
    streams = _of_latest(_read(store, "streams", night), store.known.current)
    findings = _of_latest(_read(store, "findings", night), store.known.current)
    findings = findings[findings["severity"] != REMARK].drop_duplicates(["capture_id", "call", "finding"])
    populations: dict[str, int] = {}
    for draw in store.draws():
        if draw["night"] == night.isoformat():
            populations[draw["stratum"]] = populations.get(draw["stratum"], 0) + int(draw["population"])
    calls["weight"] = _weights(calls, captures, populations)
    return Night(night, captures, calls, streams, findings.reset_index(drop=True), populations)


def kinds_in(store: Store, nights: Iterable[date]) -> list[str]:
    """Kinds of findings that any of the nights has, remarks left out."""
    kinds: set[str] = set()
    for night in nights:
        findings = _read(store, "findings", night)
        kinds |= set(findings.loc[findings["severity"] != REMARK, "finding"].dropna().unique())
    return sorted(kinds)


def _read(store: Store, table: str, night: date) -> "DataFrame":
    import pyarrow as pa
    from pyarrow import parquet

    columns = _COLUMNS[table]
    schema = pa.schema([arrow_schema(table).field(name) for name in columns])
    parts = [schema.empty_table()]
    for path in store.files(table, night):
        there = parquet.read_schema(path).names
        part = parquet.read_table(path, columns=[name for name in columns if name in there])
        for name in columns:
            if name not in there:
                part = part.append_column(name, pa.nulls(len(part), schema.field(name).type))
        parts.append(part.select(columns).cast(schema))
    return pa.concat_tables(parts).to_pandas(types_mapper=_kinds().get)


def _kinds() -> dict[Any, Any]:
    import pandas as pd
    import pyarrow as pa

    return {pa.string(): pd.StringDtype(), pa.int64(): pd.Int64Dtype(), pa.bool_(): pd.BooleanDtype()}


def _of_latest(frame: "DataFrame", current: Mapping[str, str]) -> "DataFrame":
    """Rows of the latest audit of each capture."""
    wanted = [current.get(one) for one in frame["capture_id"]]
    return frame[frame["profile"].to_numpy(object) == np.array(wanted, object)].reset_index(drop=True)


def _weights(calls: "DataFrame", captures: "DataFrame", populations: Mapping[str, int]) -> Any:
    """For how many calls each stands: captures of its stratum over those that were audited."""
    if not populations:
        return np.ones(len(calls))
    audited = captures[captures["status"] == DONE].groupby("stratum").size()
    each = {name: populations[name] / count for name, count in audited.items() if name in populations}
    stratum = dict(zip(captures["capture_id"], captures["stratum"], strict=True))
    return np.array([each.get(stratum.get(one), 1.0) for one in calls["capture_id"]], np.float64)
