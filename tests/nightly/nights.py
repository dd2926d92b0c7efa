"""Nights made of rows, without captures."""

from collections.abc import Mapping, Sequence
from datetime import date
from typing import Any

import pandas as pd

from rtpaudit.nightly.reading import Night

START = pd.Timestamp("2026-03-01T20:00:00Z")
CALL = {
    "capture_id": "aa", "profile": "p", "call": "c01", "capture": "a.pcap", "caller": "anna", "callee": "bob",
    "started": START, "ended": START + pd.Timedelta(minutes=3), "outcome": "answered", "status_code": 200,
    "setup_delay_s": 0.5, "encoding": "PCMU", "r_factor": 90.0, "quality_band": "best", "loss_pct": 0.0,
    "discard_pct": 0.0, "jitter_ms": 1.0, "one_way_delay_ms": 120.0, "headline": None, "route": None, "weight": 1.0,
}  # fmt: skip
TEXT = ("capture_id", "profile", "call", "capture", "caller", "callee", "outcome", "encoding", "quality_band", "status",
        "route", "source", "destination", "finding", "severity", "reason", "stratum", "headline")  # fmt: skip


def frame(columns: Sequence[str], given: Sequence[Mapping[str, Any]]) -> pd.DataFrame:
    """Rows as the store hands them back."""
    made = pd.DataFrame({name: [row.get(name) for row in given] for name in columns})
    kinds = {name: "string" for name in columns if name in TEXT} | {"status_code": "Int64"}
    kinds |= {name: "float64" for name in columns if name.endswith(("_s", "_pct", "_ms", "_factor", "weight"))}
    kinds |= {name: "datetime64[ns, UTC]" for name in columns if name in ("started", "ended")}
    return made.astype({name: kind for name, kind in kinds.items() if name in columns})


def night(
    calls: Sequence[Mapping[str, Any]],
    findings: Sequence[Mapping[str, Any]] = (),
    streams: Sequence[Mapping[str, Any]] = (),
) -> Night:
    """A night; each call is ``CALL`` but for what is given, with an id of its own."""
    rows = [CALL | {"call": f"c{k:02d}"} | dict(given) for k, given in enumerate(calls, 1)]
    said = [{"capture_id": "aa", "profile": "p", "severity": "fault"} | dict(one) for one in findings]
    went = [{"capture_id": "aa", "profile": "p"} | dict(one) for one in streams]
    captures = [{"capture_id": "aa", "profile": "p", "capture": "a.pcap", "status": "done"}]
    return Night(
        date(2026, 3, 1),
        frame(("capture_id", "profile", "capture", "status", "reason", "stratum"), captures),
        frame(tuple(CALL), rows),
        frame(("capture_id", "profile", "call", "source", "destination", "r_factor", "loss_pct"), went),
        frame(("capture_id", "profile", "call", "finding", "severity"), said),
        {},
    )
