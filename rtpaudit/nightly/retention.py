"""Retention: reports and sound go first, and party names with them; figures stay until they are told to go as well."""

import re
import shutil
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import date, timedelta
from pathlib import Path

from rtpaudit.errors import UnusableArguments
from rtpaudit.nightly.disk import parquet_octets, told, write_new, write_whole
from rtpaudit.nightly.store import Store

REPORTS = "calls"
"""Folder of a night that holds the reports of its worst calls, with their sound."""

# What names somebody, table by table; figures are in none of these.
NAMING: dict[str, tuple[str, ...]] = {
    "calls": ("caller", "callee", "call_id", "capture"),
    "streams": ("capture", "source", "destination"),
    "findings": ("says",),
    "signalling": ("from", "to", "message", "line", "call_id", "capture"),
    "events": ("digit",),
    "reports": ("reporter",),
    "damage": ("capture",),
    "captures": ("capture", "reason"),
}
_DONE = "names-removed"
_DAYS = re.compile(r"(?P<count>\d{1,5})\s*(?P<unit>[dw]?)")


@dataclass(frozen=True, slots=True)
class Retention:
    """How many nights are kept, None for ever."""

    names: int | None = None
    """nights for which names, reports and sound are kept"""
    figures: int | None = None
    """nights for which anything is kept"""


def parse_keep(text: str, option: str = "--keep") -> int:
    """Nights that a retention names (``30d``, ``4w``).

    Raises
    ------
    UnusableArguments
        If it names none.
    """
    match = _DAYS.fullmatch(text.strip())
    if not match or not int(match["count"]):
        raise UnusableArguments(f"{option} {text!r} is no time: write it as 30d or 4w")
    return int(match["count"]) * (7 if match["unit"] == "w" else 1)


def retire(store: Store, rule: Retention, today: date) -> list[date]:
    """Take away what the rule no longer keeps; the nights that were touched. A stop in the midst of it is made good.

    Raises
    ------
    UnusableOutput
        If the disk refuses.
    """
    touched = []
    for night in store.nights():
        folder = store.night_folder(night)
        with told(store.folder), store.locked():
            if rule.figures is not None and night < today - timedelta(days=rule.figures):
                shutil.rmtree(folder)
                touched.append(night)
            elif rule.names is not None and night < today - timedelta(days=rule.names) and _strip(folder):
                touched.append(night)
    return touched


def _strip(folder: Path) -> bool:
    """Take names, reports and sound out of a night; whether any were left."""
    done = folder / _DONE
    files = sorted(path.name for path in folder.glob("*.parquet"))
    if done.exists() and done.read_text().split() == files:
        return False
    shutil.rmtree(folder / REPORTS, ignore_errors=True)
    (folder / "index.html").unlink(missing_ok=True)
    for name in files:
        table = name.split("-", 1)[0]
        if table in NAMING:
            _without(folder / name, NAMING[table])
    done.unlink(missing_ok=True)
    write_new(done, "\n".join(files).encode())
    return True


def _without(path: Path, columns: Iterable[str]) -> None:
    """The file without the values of some columns."""
    import pyarrow as pa
    from pyarrow import parquet

    table = parquet.read_table(path, partitioning=None)
    for name in columns:
        place = table.column_names.index(name)
        table = table.set_column(place, table.schema.field(name), pa.nulls(len(table), table.schema.field(name).type))
    write_whole(path, parquet_octets(table))
