"""The store: open files under ``night=…/``, and a journal that says which of them count.

A batch is written in four steps: its files under ``pending/``, to the disk; its line in the journal, from which moment
on it counts; the files moved to their nights; its pending folder removed. Whoever opens the store next finishes what
was stopped between the second step and the last, and takes away what was stopped before.
"""

import json
import os
import secrets
import shutil
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from datetime import UTC, date, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rtpaudit import __version__
from rtpaudit.errors import UnusableHistory
from rtpaudit.nightly.disk import (
    OWNER_ONLY_FOLDER,
    make_folder,
    parquet_octets,
    subfolders,
    sync_folder,
    told,
    write_new,
    write_whole,
)
from rtpaudit.nightly.journal import DONE, DRAWN, FAILED, KNOWN, PASSED, Batch, Entry, Journal, Known
from rtpaudit.nightly.lock import OWNER_ONLY, hold, is_held, locked
from rtpaudit.nightly.schema import NIGHT, SCHEMA, SCHEMA_VERSION, STORED, arrow_schema

if TYPE_CHECKING:
    import pyarrow as pa

_ABOUT, _JOURNAL, _LOCK, _PENDING, _RUN = "store.json", "journal.jsonl", "lock", "pending", "run"


@dataclass(slots=True)
class Rows:
    """Results on their way to the store."""

    entries: list[Entry] = field(default_factory=list)
    tables: dict[str, list["pa.Table"]] = field(default_factory=lambda: {name: [] for name in STORED})
    draws: list[Mapping[str, Any]] = field(default_factory=list)
    octets: int = 0

    def add(self, entries: Iterable[Entry], tables: Mapping[str, "pa.Table"]) -> None:
        """More captures with their rows; rows of a capture that is among these already are left out."""
        import pyarrow as pa
        from pyarrow import compute

        given = list(entries)
        held = {one.capture for one in self.entries if one.status in (DONE, FAILED)}
        twice = pa.array([one.capture for one in given if one.capture in held], pa.string())
        self.entries += given
        for name, table in tables.items():
            if len(twice):
                table = table.filter(compute.invert(compute.is_in(table["capture_id"], twice)))
            self.tables[name].append(table)
            self.octets += table.nbytes


class Store:
    """One folder of nights."""

    def __init__(self, folder: Path, about: dict[str, Any]) -> None:
        self.folder = folder
        self.about = about
        self.journal = Journal(folder / _JOURNAL)
        self.known = Known(__version__)
        self._run: Path | None = None
        self._handle = -1

    @classmethod
    def open(cls, folder: str | Path, create: bool = False) -> "Store":
        """Open a store, and finish or undo what a run that was stopped left behind.

        Raises
        ------
        UnusableHistory
            If it is none, or another version's, or damaged.
        """
        place = Path(folder).absolute()
        with told(place):
            if create:
                _create(place)
            store = cls(place, _read_about(place))
            with store.locked():
                store._recover()
        return store

    @contextmanager
    def locked(self) -> Iterator[None]:
        """No other run commits meanwhile; the journal is read up to its end."""
        with locked(self.folder / _LOCK):
            self.refresh()
            yield

    def refresh(self) -> None:
        """Take in what other runs committed."""
        for batch in self.journal.read():
            self.known.add(batch)

    def others_at_work(self) -> bool:
        """Whether another run is at work on this store."""
        return any(is_held(one / _RUN) for one in subfolders(self.folder / _PENDING) if one != self._run)

    def begin(self) -> None:
        """Begin a run: a pending folder of its own, locked as long as this process lives."""
        with told(self.folder), locked(self.folder / _LOCK):
            self._run = self.folder / _PENDING / f"{os.getpid()}-{secrets.token_hex(4)}"
            make_folder(self._run.parent)
            self._run.mkdir(OWNER_ONLY_FOLDER)
            self._handle = hold(self._run / _RUN)

    def end(self) -> None:
        """End a run."""
        if self._run is None:
            return
        run, self._run = self._run, None
        os.close(self._handle)
        with told(self.folder), self.locked():
            self._finish(run)

    def commit(self, rows: Rows) -> int:
        """Put results into the store, but for captures that are there already; how many captures were new.

        Raises
        ------
        UnusableOutput
            If the disk is full or refuses; the store then holds all of these results or none.
        """
        if self._run is None:
            raise UnusableHistory(f"{self.folder}: nothing is committed outside a run")
        with told(self.folder), self.locked():
            entries = self._new(rows.entries)
            if not entries and not rows.draws:
                return 0
            batch = Batch(_batch_id(), _now(), entries=tuple(entries), draws=tuple(rows.draws))
            wanted = {(one.capture, one.profile) for one in entries if one.status in (DONE, FAILED)}
            pending = self._run / batch.id
            try:
                batch = replace(batch, files=tuple(_write_tables(pending, rows.tables, wanted, batch.id)))
                for folder in {name.split("/", 1)[0] for name in batch.files}:
                    make_folder(self.folder / folder)
                self.journal.append(batch)
            except OSError:
                shutil.rmtree(pending, ignore_errors=True)
                raise
            self.known.add(batch)
            _move(pending, self.folder)
        return len(wanted)

    def nights(self) -> list[date]:
        """Nights that hold anything, in order."""
        names = {name.split("/", 1)[0] for batch in self.known.batches.values() for name in batch.files}
        found = (date.fromisoformat(name.removeprefix("night=")) for name in names)
        return sorted(night for night in found if self.night_folder(night).is_dir())

    def night_folder(self, night: date) -> Path:
        """Folder of a night."""
        return self.folder / f"{NIGHT}={night.isoformat()}"

    def files(self, table: str, night: date) -> list[Path]:
        """Files of a table of a night, in the order in which they were committed."""
        start = f"{NIGHT}={night.isoformat()}/{table}-"
        names = (name for batch in self.known.batches.values() for name in batch.files if name.startswith(start))
        return [path for name in names if (path := self.folder / name).exists()]

    def draws(self) -> list[Mapping[str, Any]]:
        """Populations of all samples, in the order in which they were drawn."""
        return [draw for batch in self.known.batches.values() for draw in batch.draws]

    def note(self, **values: Any) -> None:
        """Keep something in the store's description."""
        with told(self.folder), locked(self.folder / _LOCK):
            self.about = _read_about(self.folder) | values
            write_whole(self.folder / _ABOUT, _about_text(self.about))

    def _new(self, entries: Iterable[Entry]) -> list[Entry]:
        """What of these the journal does not say yet, each capture and profile once."""
        new: list[Entry] = []
        named: set[tuple[str, str]] = set()
        for entry in entries:
            key = (entry.capture, entry.profile)
            if entry.status in (DRAWN, PASSED):
                new.append(entry)
            elif entry.status in (DONE, FAILED) and key not in named and not self.known.has(*key):
                named.add(key)
                new.append(entry)
            elif not self.known.has_seen(entry.place, entry.look, entry.profile):
                new.append(replace(entry, status=KNOWN))
        return new

    def _recover(self) -> None:
        for run in subfolders(self.folder / _PENDING):
            if run != self._run and not is_held(run / _RUN):
                self._finish(run)

    def _finish(self, run: Path) -> None:
        """Put in place what a run committed, and take away the rest of it."""
        for pending in subfolders(run):
            if pending.name in self.known.batches:
                _move(pending, self.folder)
        shutil.rmtree(run, ignore_errors=True)


def _write_tables(
    pending: Path, tables: Mapping[str, list["pa.Table"]], wanted: set[tuple[str, str]], batch: str
) -> list[str]:
    """One file per table and night, on the disk when this returns; their names below the store."""
    make_folder(pending)
    files = []
    for name, parts in tables.items():
        for night, table in _by_night(name, parts, wanted):
            folder = f"{NIGHT}={night.isoformat()}"
            make_folder(pending / folder)
            write_new(pending / folder / f"{name}-{batch}.parquet", parquet_octets(table))
            files.append(f"{folder}/{name}-{batch}.parquet")
    for written in [*subfolders(pending), pending, pending.parent]:
        sync_folder(written)
    return files


def _by_night(name: str, parts: list["pa.Table"], wanted: set[tuple[str, str]]) -> Iterator[tuple[date, "pa.Table"]]:
    import pyarrow as pa
    from pyarrow import compute

    table = pa.concat_tables([arrow_schema(name, with_night=True).empty_table(), *parts])
    keys = pa.array(sorted(f"{capture} {profile}" for capture, profile in wanted), pa.string())
    theirs = compute.binary_join_element_wise(table["capture_id"], table["profile"], " ")
    table = table.filter(compute.is_in(theirs, keys))
    for night in sorted(compute.unique(table[NIGHT]).to_pylist()):
        yield night, table.filter(compute.equal(table[NIGHT], night)).drop_columns([NIGHT])


def _move(pending: Path, store: Path) -> None:
    """Files of a committed batch to their nights; some may be there already."""
    for folder in subfolders(pending):
        night = store / folder.name
        make_folder(night)
        for path in sorted(folder.iterdir()):
            os.replace(path, night / path.name)
        sync_folder(night)
    sync_folder(store)
    shutil.rmtree(pending, ignore_errors=True)


def _create(place: Path) -> None:
    """Make an empty folder, or none, a store."""
    if (place / _ABOUT).exists():
        return
    if place.exists() and (not place.is_dir() or any(one.name != _LOCK for one in place.iterdir())):
        raise UnusableHistory(f"{place}: is there and no store of nights; choose an empty folder for --store")
    make_folder(place)
    with locked(place / _LOCK):
        if not (place / _ABOUT).exists():
            about = {"schema": SCHEMA, "schema_version": SCHEMA_VERSION, "id": secrets.token_hex(8), "created": _now()}
            os.close(os.open(place / _JOURNAL, os.O_WRONLY | os.O_CREAT, OWNER_ONLY))
            write_whole(place / _ABOUT, _about_text(about))


def _read_about(place: Path) -> dict[str, Any]:
    try:
        about = json.loads((place / _ABOUT).read_bytes())
    except FileNotFoundError:
        raise UnusableHistory(f"{place}: is no store of nights; name the folder that was given as --store") from None
    except ValueError:
        about = None
    if not isinstance(about, dict) or about.get("schema") != SCHEMA or not isinstance(about.get("id"), str):
        raise UnusableHistory(f"{place / _ABOUT}: is damaged; bring it back from a copy")
    version = about.get("schema_version")
    if not isinstance(version, int) or not 1 <= version <= SCHEMA_VERSION:
        raise UnusableHistory(
            f"{place}: has schema version {version}, and this rtpaudit ({__version__}) reads up to {SCHEMA_VERSION}; "
            "use a newer rtpaudit"
        )
    return about


def _about_text(about: Mapping[str, Any]) -> bytes:
    return (json.dumps(about, indent=1) + "\n").encode()


def _batch_id() -> str:
    return f"{datetime.now(UTC):%Y%m%dT%H%M%S}-{secrets.token_hex(4)}"


def _now() -> str:
    return datetime.now(UTC).isoformat(timespec="seconds")
