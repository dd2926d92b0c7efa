"""Assessed calls and findings as DataFrames: the columns, their order and their kinds by ``rtpaudit.columns``."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from itertools import chain
from typing import TYPE_CHECKING, Any

import numpy as np

from rtpaudit.assess.results import CALL_FIGURES, STREAM_FIGURES, AssessedCall, AssessedStream, Assessment
from rtpaudit.columns import TABLES, Kind
from rtpaudit.media.streams import Stream
from rtpaudit.units import NS_PER_S

if TYPE_CHECKING:
    from pandas import DataFrame

# What a row of assess carries under the very name of the column.
_STREAM_FACTS = tuple(one.name for one in TABLES["streams"] if one.name in Stream.__dataclass_fields__)
_CALL_FACTS = tuple(one.name for one in TABLES["calls"] if one.name in AssessedCall.__dataclass_fields__)
Columns = Mapping[str, Any]
"""Cells by column, as lists or arrays of one length."""

_NO_TIME = np.iinfo(np.int64).min
_LAST = np.iinfo(np.int64).max


def build_tables(
    assessment: Assessment,
    findings: Sequence[Any] = (),
    signalling: Sequence[Any] = (),
    events: Sequence[Any] = (),
    reports: Sequence[Any] = (),
) -> dict[str, DataFrame]:
    """All tables of one audit, in the order of ``rtpaudit.columns.TABLES``.

    Parameters
    ----------
    assessment : Assessment
        Streams, calls and damage.
    findings, signalling, events, reports : sequence of objects
        One per row, with an attribute for each column. A time column ``x`` is read from ``x_ns``, and a column whose
        name Python keeps for itself (``from``) from the name with an underscore behind it.
    """
    columns = table_columns(assessment, findings, signalling, events, reports)
    return {name: build_frame(name, [columns[name]]) for name in TABLES}


def table_columns(
    assessment: Assessment,
    findings: Sequence[Any] = (),
    signalling: Sequence[Any] = (),
    events: Sequence[Any] = (),
    reports: Sequence[Any] = (),
) -> dict[str, Columns]:
    """The columns of all tables of one audit, from which ``build_frame`` makes DataFrames; as ``build_tables``."""
    streams = sorted(assessment.streams, key=lambda one: id_number(one.id))
    calls = sorted(assessment.calls, key=lambda one: id_number(one.id))
    made: dict[str, Columns] = {
        "calls": _calls(calls),
        "streams": _streams(streams),
        "gaps": _gaps(streams),
        "windows": _windows(streams),
        "damage": _rows("damage", assessment.damage),
    }
    for name, rows in (("findings", findings), ("signalling", signalling), ("events", events), ("reports", reports)):
        made[name] = _rows(name, sorted(rows, key=_place))
    return made


def build_frame(table: str, parts: Sequence[Columns]) -> DataFrame:
    """One table out of the columns of one audit or, one after the other, of several: many small ones cost as one."""
    import pandas as pd

    made = {one.name: _AS_KIND[one.kind](_end_to_end([part[one.name] for part in parts])) for one in TABLES[table]}
    return pd.DataFrame(made, copy=False)


def _end_to_end(parts: Sequence[Any]) -> Any:
    first = parts[0]
    if len(parts) == 1:
        return first
    if isinstance(first, list):
        return list(chain.from_iterable(parts))
    if isinstance(first, np.ma.MaskedArray):
        return np.ma.array(
            np.concatenate([one.data for one in parts]), mask=np.concatenate([one.mask for one in parts])
        )
    if isinstance(first, np.ndarray):
        return np.concatenate(parts)
    return type(first)._concat_same_type(parts)


def id_number(identifier: str) -> int:
    """Number within an id such as ``s07``, by which rows are ordered; rows without an id come last."""
    return int(identifier[1:]) if identifier else _LAST


def _place(row: Any) -> tuple[int, int, float]:
    """Where a row belongs: call, then stream, then time."""
    when = row.time_ns if hasattr(row, "time_ns") else row.from_s
    return id_number(row.call), id_number(getattr(row, "stream", "")), -np.inf if when != when else when


def _streams(streams: Sequence[AssessedStream]) -> dict[str, Any]:
    columns: dict[str, Any] = {name: [getattr(one.stream, name) for one in streams] for name in _STREAM_FACTS}
    columns |= {name: [getattr(one.figures, name) for one in streams] for name in STREAM_FIGURES}
    return columns | {
        "stream": [one.id for one in streams],
        "call": [one.call for one in streams],
        "ssrc": [f"0x{one.stream.ssrc:08x}" for one in streams],
        "started": [one.started_ns for one in streams],
        "ended": [one.ended_ns for one in streams],
        "duration_s": [(one.ended_ns - one.started_ns) / NS_PER_S for one in streams],
    }


def _calls(calls: Sequence[AssessedCall]) -> dict[str, Any]:
    columns: dict[str, Any] = {name: [getattr(one, name) for one in calls] for name in _CALL_FACTS}
    columns |= {name: [getattr(one.figures, name) for one in calls] for name in CALL_FIGURES}
    return columns | {
        "call": [one.id for one in calls],
        "started": [one.started_ns for one in calls],
        "answered": [one.answered_ns for one in calls],
        "ended": [one.ended_ns for one in calls],
        "streams": [len(one.from_caller) + len(one.from_callee) for one in calls],
    }


def _gaps(streams: Sequence[AssessedStream]) -> dict[str, Any]:
    counts = [len(one.gaps.at_ns) for one in streams]
    at = _joined([one.gaps.at_ns for one in streams], np.int64)
    # By sequence they may differ from the order of time where packets overtook each other.
    order = np.lexsort((at, np.repeat(np.arange(len(streams)), counts)))
    columns = {
        "first_missing": _joined([one.gaps.first_missing for one in streams], np.int64)[order],
        "packets_missing": _joined([one.gaps.packets_missing for one in streams], np.int64)[order],
        "at": at[order],
        "duration_ms": _joined([one.gaps.duration_ms for one in streams], np.float64)[order],
        "after_s": _joined([one.gaps.after_s for one in streams], np.float64)[order],
    }
    return {"stream": _repeated([one.id for one in streams], counts), **columns}


def _windows(streams: Sequence[AssessedStream]) -> dict[str, Any]:
    counts = [len(one.windows.from_s) for one in streams]
    columns: dict[str, Any] = {"stream": _repeated([one.id for one in streams], counts)}
    for column in TABLES["windows"][1:]:
        parts = [getattr(one.windows, column.name) for one in streams]
        columns[column.name] = _counted(parts, counts) if column.kind == "count" else _joined(parts, np.float64)
    return columns


def _rows(table: str, rows: Sequence[Any]) -> dict[str, list[Any]]:
    """Columns out of objects that carry a row's cells as attributes."""
    columns: dict[str, list[Any]] = {}
    for column in TABLES[table]:
        attribute = f"{column.name}_ns" if column.kind == "time" else column.name
        columns[column.name] = [getattr(row, "from_" if attribute == "from" else attribute) for row in rows]
    return columns


def _joined(parts: Sequence[Any], dtype: Any) -> Any:
    return np.concatenate([np.empty(0, dtype), *parts])


def _counted(parts: Sequence[Any], counts: Sequence[int]) -> Any:
    """Parts one after the other, masked where a stream has no such counts."""
    filled = [np.zeros(count, np.int64) if part is None else part for part, count in zip(parts, counts, strict=True)]
    return np.ma.array(_joined(filled, np.int64), mask=np.repeat([part is None for part in parts], counts))


def _repeated(identifiers: Sequence[str], counts: Sequence[int]) -> Any:
    return _text(identifiers).repeat(np.asarray(counts, np.int64))


def _text(cells: Any) -> Any:
    import pandas as pd

    if isinstance(cells, pd.api.extensions.ExtensionArray):
        return cells
    return pd.array([_printable(cell) if cell else pd.NA for cell in cells], dtype="string")


def _printable(cell: str) -> str:
    """The text in characters that every file can hold: a file name may bring octets that are none in UTF-8."""
    return cell if cell.isascii() else cell.encode("utf-8", "replace").decode("utf-8")


def _count(cells: Any) -> Any:
    import pandas as pd

    if isinstance(cells, np.ndarray):
        return pd.arrays.IntegerArray(np.ma.getdata(cells), np.ma.getmaskarray(cells))
    missing = np.fromiter((cell is None for cell in cells), np.bool_, len(cells))
    return pd.arrays.IntegerArray(np.fromiter((cell or 0 for cell in cells), np.int64, len(cells)), missing)


def _number(cells: Any) -> Any:
    return np.asarray(cells, np.float64)


def _time(cells: Any) -> Any:
    import pandas as pd

    if not isinstance(cells, np.ndarray):
        cells = np.fromiter((_NO_TIME if cell is None else cell for cell in cells), np.int64, len(cells))
    return pd.DatetimeIndex(cells.view("M8[ns]"), tz="UTC").array


def _yes_no(cells: Any) -> Any:
    import pandas as pd

    missing = np.fromiter((cell is None for cell in cells), np.bool_, len(cells))
    return pd.arrays.BooleanArray(np.fromiter((bool(cell) for cell in cells), np.bool_, len(cells)), missing)


_AS_KIND: dict[Kind, Callable[[Any], Any]] = {
    "text": _text,
    "count": _count,
    "number": _number,
    "time": _time,
    "yes_no": _yes_no,
}
