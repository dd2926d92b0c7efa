"""What the store's tables hold: those of an audit with a few columns more, and one table of captures."""

from typing import TYPE_CHECKING

from rtpaudit.columns import TABLES, Kind

if TYPE_CHECKING:
    import pyarrow as pa

SCHEMA = "rtpaudit nights"
SCHEMA_VERSION = 1
"""One more whenever an older reader would misread the newer store; a new column is no such thing."""

NIGHT = "night"
"""in rows on their way to the store; there it is the folder's name"""

_EVERYWHERE: tuple[tuple[str, Kind], ...] = (("capture_id", "text"), ("profile", "text"))
_MORE: dict[str, tuple[tuple[str, Kind], ...]] = {"calls": (("route", "text"), ("discard_pct", "number"))}
_CAPTURES: tuple[tuple[str, Kind], ...] = (
    ("capture", "text"),
    ("status", "text"),
    ("reason", "text"),
    ("stratum", "text"),
    ("started", "time"),
    ("octets", "count"),
    ("packets", "count"),
    ("streams", "count"),
    ("calls", "count"),
    ("audit_s", "number"),
    ("audited", "time"),
    ("rtpaudit", "text"),
)

STORED: dict[str, tuple[tuple[str, Kind], ...]] = {
    name: (*_EVERYWHERE, *((one.name, one.kind) for one in columns), *_MORE.get(name, ()))
    for name, columns in TABLES.items()
} | {"captures": (*_EVERYWHERE, *_CAPTURES)}
"""Columns of every stored table: name and kind."""


def arrow_schema(table: str, with_night: bool = False) -> "pa.Schema":
    """Arrow schema of a stored table."""
    import pyarrow as pa

    kinds = {
        "text": pa.string(),
        "count": pa.int64(),
        "number": pa.float64(),
        "time": pa.timestamp("ns", "UTC"),
        "yes_no": pa.bool_(),
    }
    fields = [(name, kinds[kind]) for name, kind in STORED[table]]
    if with_night:
        fields.append((NIGHT, pa.date32()))
    return pa.schema(fields, metadata={"schema": SCHEMA, "schema_version": str(SCHEMA_VERSION)})
