"""Tables as plain values for JSON: rows as dicts, times as milliseconds since 1970, None where there is none."""

from __future__ import annotations

from collections import defaultdict
from typing import TYPE_CHECKING, Any

import numpy as np

from rtpaudit.columns import TABLES, Column

if TYPE_CHECKING:
    from pandas import DataFrame, Series

Row = dict[str, Any]

NS_PER_MS = 1_000_000
NO_TIME = np.iinfo(np.int64).min


def rows(table: str, frame: DataFrame) -> list[Row]:
    """Each row of a table with its cells by column name."""
    columns = {column.name: _cells(column, frame[column.name]) for column in TABLES[table]}
    return [dict(zip(columns, cells, strict=True)) for cells in zip(*columns.values(), strict=True)]


def rows_by_call(table: str, frame: DataFrame) -> dict[str, list[Row]]:
    """The rows of each call in their order; "" has those of none."""
    found: dict[str, list[Row]] = defaultdict(list)
    for row in rows(table, frame):
        found[row["call"] or ""].append(row)
    return found


def number(value: float) -> float | None:
    """A number as short as six significant digits make it, None where there is none."""
    return float(f"{value:.6g}") if np.isfinite(value) else None


def numbers(values: Any, digits: int = 1) -> list[float | None]:
    """An array as numbers with few digits behind the point, None where there is none."""
    rounded = np.round(np.asarray(values, np.float64), digits)
    return [one if one == one and abs(one) != np.inf else None for one in rounded.tolist()]


def _cells(column: Column, series: Series) -> list[Any]:
    if column.kind == "number":
        return [number(value) for value in series.to_numpy(np.float64).tolist()]
    if column.kind == "time":
        times = series.dt.tz_localize(None).to_numpy("M8[ns]").view(np.int64)
        return [None if time == NO_TIME else time / NS_PER_MS for time in times.tolist()]
    return list(series.array.to_numpy(object, na_value=None))
