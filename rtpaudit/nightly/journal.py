"""The journal: one line for each batch that the store holds. A batch is in the store if and only if its line is whole.

A line is a checksum and a JSON object. A last line that was cut by a crash is no line, and is taken away before another
is written; the batch that it was to name is done again.
"""

import json
import os
import zlib
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

from rtpaudit.errors import UnusableHistory
from rtpaudit.nightly.lock import OWNER_ONLY

DONE, FAILED, KNOWN = "done", "failed", "known"
DRAWN, PASSED = "drawn", "passed"
MOST_OF_A_SIZE = 256


@dataclass(frozen=True, slots=True)
class Entry:
    """One capture in a batch."""

    capture: str
    """by its content"""
    profile: str
    status: str
    """``done`` or ``failed``; ``known`` is the same content under another name; ``drawn`` into a sample, or ``passed``
    over by it, of which the content was not read. Only the first two have rows."""
    size: int
    place: str
    """keyed digest of its address, which the journal does not tell"""
    look: str
    """what it looked like without being read"""
    version: str
    """of rtpaudit"""
    stratum: str = ""
    """of a capture that was drawn"""


@dataclass(frozen=True, slots=True)
class Batch:
    """What was committed at one time."""

    id: str
    committed: str
    files: tuple[str, ...] = ()
    """below the store"""
    entries: tuple[Entry, ...] = ()
    draws: tuple[Mapping[str, Any], ...] = ()
    """how many captures each stratum held when its sample was drawn"""


@dataclass(slots=True)
class Known:
    """What the journal says of captures."""

    version: str
    """of the rtpaudit that asks: what failed under another one is tried again"""
    batches: dict[str, Batch] = field(default_factory=dict)
    latest: dict[tuple[str, str], str] = field(default_factory=dict)
    """batch that holds a capture and profile"""
    current: dict[str, str] = field(default_factory=dict)
    """profile with which a capture was audited last"""
    looks: dict[tuple[str, str], set[str]] = field(default_factory=dict)
    """by place and profile"""
    by_size: dict[tuple[int, str], set[str]] = field(default_factory=dict)
    passed: set[tuple[str, str]] = field(default_factory=set)
    """place and look of captures that a sample passed over"""
    drawn: dict[tuple[str, str], str] = field(default_factory=dict)
    """stratum of those that it drew"""

    def add(self, batch: Batch) -> None:
        """Take in one more batch."""
        self.batches[batch.id] = Batch(batch.id, batch.committed, batch.files, (), batch.draws)
        for entry in batch.entries:
            if entry.status == PASSED:
                self.passed.add((entry.place, entry.look))
                continue
            if entry.status == DRAWN:
                self.drawn[entry.place, entry.look] = entry.stratum
                continue
            if entry.status in (DONE, FAILED):
                self.current[entry.capture] = entry.profile
            if entry.status == FAILED and entry.version != self.version:
                continue
            self.looks.setdefault((entry.place, entry.profile), set()).add(entry.look)
            if entry.status != KNOWN:
                self.latest.setdefault((entry.capture, entry.profile), batch.id)
                self.by_size.setdefault((entry.size, entry.profile), set()).add(entry.capture)

    def has(self, capture: str, profile: str) -> bool:
        """Whether a capture was audited with a profile."""
        return (capture, profile) in self.latest

    def has_seen(self, place: str, look: str, profile: str) -> bool:
        """Whether the file at a place was audited as it looks now."""
        return look in self.looks.get((place, profile), ())

    def of_size(self, size: int, profile: str) -> tuple[str, ...]:
        """Captures that a file of this size may be; none where looking through them costs more than it saves."""
        found = self.by_size.get((size, profile), set())
        return tuple(sorted(found)) if len(found) <= MOST_OF_A_SIZE else ()


class Journal:
    """The file of lines. Whoever writes holds the store's lock."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._offset = 0
        self._lines = 0

    def read(self) -> list[Batch]:
        """The batches since the last call, in order.

        Raises
        ------
        UnusableHistory
            If a line before the last is damaged.
        """
        try:
            with open(self.path, "rb") as file:
                file.seek(self._offset)
                octets = file.read()
        except FileNotFoundError:
            return []
        batches = []
        whole, _, rest = octets.rpartition(b"\n")
        lines = whole.split(b"\n") if whole else []
        for number, line in enumerate(lines, 1):
            batch = _parse(line)
            if batch is None and number == len(lines) and not rest:
                break
            if batch is None:
                where = f"{self.path}: line {self._lines + number} is damaged"
                raise UnusableHistory(f"{where}: bring the file back from a copy, or start another store")
            batches.append(batch)
            self._offset += len(line) + 1
        self._lines += len(batches)
        return batches

    def append(self, batch: Batch) -> None:
        """Write one line to the disk, or nothing. What stood before is read, and the lock is held."""
        text = json.dumps(asdict(batch), separators=(",", ":"))
        line = f"{zlib.crc32(text.encode()):08x} {text}\n".encode()
        handle = os.open(self.path, os.O_RDWR | os.O_CREAT, OWNER_ONLY)
        try:
            os.ftruncate(handle, self._offset)
            try:
                _write_all(handle, line, self._offset)
                os.fsync(handle)
            except OSError:
                os.ftruncate(handle, self._offset)
                raise
        finally:
            os.close(handle)
        self._offset += len(line)
        self._lines += 1


def _write_all(handle: int, octets: bytes, offset: int) -> None:
    os.lseek(handle, offset, os.SEEK_SET)
    rest = memoryview(octets)
    while rest:
        rest = rest[os.write(handle, rest) :]


def _parse(line: bytes) -> Batch | None:
    checksum, _, text = line.partition(b" ")
    if checksum != f"{zlib.crc32(text):08x}".encode():
        return None
    try:
        value = json.loads(text)
        entries = tuple(Entry(**entry) for entry in value["entries"])
        return Batch(value["id"], value["committed"], tuple(value["files"]), entries, tuple(value["draws"]))
    except (ValueError, KeyError, TypeError):
        return None
