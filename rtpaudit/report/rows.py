"""Tables as lines of text, CSV and JSON: whole columns are turned into text at once, then joined row by row."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING, Any

import numpy as np

from rtpaudit.columns import TABLES, Column

if TYPE_CHECKING:
    from pandas import DataFrame, Series

ROWS_AT_ONCE = 65_536

# What a spreadsheet takes for a formula: these openings, also in full width. A telephone number is none.
_FORMULA = re.compile(r"[\t\r\n ]*[=+\-@\uff1d\uff0b\uff0d\uff20]|[\t\r]")
_TELEPHONE_NUMBER = re.compile(r"\+[0-9]+")
_TO_BE_QUOTED = re.compile(r"""[",\r\n]|^\s|\s$""")


def csv_lines(table: str, frame: DataFrame) -> Iterator[Any]:
    """A table as CSV (RFC 4180 but for the line ends), buffer after buffer; empty cells where there is no value."""
    yield (",".join(column.name for column in TABLES[table]) + "\n").encode()
    for part in _parts(frame):
        cells = [_cells(column, part[column.name], csv_cell) for column in TABLES[table]]
        yield _joined([*[cell for one in cells for cell in (one, ",")][:-1], "\n"], missing="")


def json_lines(table: str, frame: DataFrame) -> Iterator[Any]:
    """A table as the inside of a JSON array, one object a line, buffer after buffer; null where there is no value."""
    for begin, part in enumerate(_parts(frame)):
        pieces: list[Any] = ["{"]
        for column in TABLES[table]:
            pieces += [f"{json.dumps(column.name)}:", _cells(column, part[column.name], json.dumps), ","]
        text = bytes(_joined([*pieces[:-1], "},\n"], missing="null"))
        if begin * ROWS_AT_ONCE + len(part) == len(frame):
            text = text[:-2] + b"\n"
        yield text


def csv_cell(text: str) -> str:
    """Text as a cell that no spreadsheet takes for a formula, in quotes where it needs them."""
    text = text.replace("\0", "\ufffd")  # readers written in C take it for the end of the text
    if _FORMULA.match(text) and not _TELEPHONE_NUMBER.fullmatch(text):
        text = "'" + text
    return '"' + text.replace('"', '""') + '"' if _TO_BE_QUOTED.search(text) else text


def _parts(frame: DataFrame) -> Iterator[DataFrame]:
    for begin in range(0, len(frame), ROWS_AT_ONCE):
        yield frame.iloc[begin : begin + ROWS_AT_ONCE]


def _cells(column: Column, series: Series, written: Callable[[str], str]) -> Any:
    """A column as Arrow text, null where there is no value."""
    import pyarrow as pa

    if column.kind == "text":
        coded = pa.array(series.array, type=pa.string()).dictionary_encode()
        return pa.array([written(text) for text in coded.dictionary.to_pylist()], pa.string()).take(coded.indices)
    if column.kind == "number":
        numbers = series.to_numpy(np.float64)
        return pa.array(numbers, mask=~np.isfinite(numbers)).cast(pa.string())
    if column.kind == "time":
        times = series.dt.tz_localize(None).to_numpy("M8[ns]")
        text = np.char.add(np.datetime_as_string(times, unit="ns"), "Z")
        quoted = [written(one) for one in text.tolist()]
        return pa.array(quoted, pa.string(), mask=np.isnat(times))
    return pa.array(series.array).cast(pa.string())


def _joined(pieces: list[Any], missing: str) -> Any:
    """The octets of all rows, one behind the other."""
    import pyarrow as pa
    from pyarrow import compute

    wide = pa.large_string()
    cells = [pa.scalar(one, wide) if isinstance(one, str) else one.cast(wide) for one in [*pieces, ""]]
    rows = compute.binary_join_element_wise(*cells, null_handling="replace", null_replacement=missing)
    offsets = np.frombuffer(rows.buffers()[1], np.int64)
    return memoryview(rows.buffers()[2])[offsets[0] : offsets[len(rows)]]
