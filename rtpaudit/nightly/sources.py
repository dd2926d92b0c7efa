"""Sources: folders, globs and addresses come in; the captures that lie there go out, in order of their names."""

import glob
import os
import stat
import time
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any

from rtpaudit.capture.compressed import compression
from rtpaudit.capture.damage import printable
from rtpaudit.capture.recognise import HEAD, container_of
from rtpaudit.errors import UnusableArguments

SETTLE_S = 60.0
"""A file that changed within this time may still be written to."""

_NS_PER_S = 1_000_000_000
# What file systems call the version of a file, the most telling first.
_MARKS = ("etag", "ETag", "checksum", "md5", "contentHash")
_TIMES = ("mtime", "LastModified", "last_modified", "updated", "modified", "created")


@dataclass(frozen=True, slots=True)
class Found:
    """A file as the listing saw it."""

    address: str
    """absolute path, or address with its scheme"""
    size: int
    changed_ns: int
    """last modification; 0 where the place does not tell"""
    mark: str = ""
    """version of the file by the word of a remote place"""
    source: str = ""
    """for a remote one: the source that it was found by, which may hold what logs in"""
    path: str = ""
    """for a remote one: its path there"""

    @property
    def remote(self) -> bool:
        """Whether it has to be fetched."""
        return bool(self.source)

    @property
    def name(self) -> str:
        """Base name, safe to show."""
        return printable(self.address.rstrip("/").rsplit("/", 1)[-1])

    @property
    def look(self) -> str:
        """What tells without reading that a file is as it was."""
        return f"{self.size} {self.changed_ns} {self.mark}".rstrip()


@dataclass(slots=True)
class Listing:
    """What the sources hold now."""

    captures: list[Found]
    unsettled: list[Found]
    """still being written; left for the next run"""


def is_address(source: str) -> bool:
    """Whether a source names a place by a scheme (``s3://…``)."""
    return "://" in source


def list_sources(sources: Sequence[str], settle_s: float = SETTLE_S, now_ns: int | None = None) -> Listing:
    """All files of the sources, each once, by address; in folders only what begins like a capture.

    Raises
    ------
    UnusableArguments
        If a source names nothing, or its place cannot be listed.
    """
    now = time.time_ns() if now_ns is None else now_ns
    found: dict[str, Found] = {}
    for source in sources:
        for one in _remote(source) if is_address(source) else _local(source):
            found.setdefault(one.address, one)
    listing = Listing([], [])
    for _, one in sorted(found.items()):
        age = abs(now - one.changed_ns) / _NS_PER_S
        (listing.unsettled if age < settle_s else listing.captures).append(one)
    return listing


def begins_like_a_capture(head: bytes) -> bool:
    """Whether the first octets are those of a capture, or of a compressed file, which may hold one."""
    return bool(container_of(head) or compression(head))


def look_again(found: Found) -> Found | None:
    """A local file as it is now, None where it is gone; a remote one as it was."""
    if found.remote:
        return found
    try:
        return _seen(found.address, os.stat(found.address))
    except OSError:
        return None


def _local(source: str) -> Iterator[Found]:
    if os.path.isdir(source):
        yield from _walk(os.path.realpath(source), seen=set())
    elif os.path.exists(source):
        yield _named(source)
    elif glob.has_magic(source):
        matches = glob.glob(source, recursive=True)
        if not matches:
            raise UnusableArguments(f"{printable(source)}: nothing matches; check the pattern and the folder")
        for match in matches:
            # A pattern may match folders too; what lies in them was not asked for.
            if not os.path.isdir(match):
                yield _named(match)
    else:
        raise UnusableArguments(f"{printable(source)}: there is no such file or folder")


def _named(path: str) -> Found:
    """A file that the user named: whatever it holds, he wants to hear of it."""
    place = os.path.realpath(path)
    try:
        return _seen(place, os.stat(place))
    except OSError as fault:
        raise UnusableArguments(f"{printable(path)}: cannot be looked at ({fault.strerror})") from fault


def _walk(folder: str, seen: set[tuple[int, int]]) -> Iterator[Found]:
    """Files of a folder and the folders in it; hidden ones, and what begins like no capture, are passed over."""
    try:
        with os.scandir(folder) as entries:
            ordered = sorted(entries, key=lambda entry: entry.name)
    except OSError as fault:
        raise UnusableArguments(f"{printable(folder)}: cannot be listed ({fault.strerror})") from fault
    for entry in ordered:
        if entry.name.startswith("."):
            continue
        if entry.is_dir(follow_symlinks=False):
            yield from _walk(entry.path, seen)
        else:
            yield from _file(entry, seen)


def _file(entry: "os.DirEntry[str]", seen: set[tuple[int, int]]) -> Iterator[Found]:
    try:
        status = entry.stat()
    except OSError:
        return  # gone meanwhile
    identity = (status.st_dev, status.st_ino)
    if not stat.S_ISREG(status.st_mode) or identity in seen:
        return
    seen.add(identity)
    try:
        with open(entry.path, "rb") as file:
            wanted = begins_like_a_capture(file.read(HEAD))
    except OSError:
        wanted = True  # who audits it tells why it cannot be read
    if wanted:
        yield _seen(entry.path, status)


def _seen(path: str, status: os.stat_result) -> Found:
    return Found(path, status.st_size, status.st_mtime_ns)


def _remote(source: str) -> Iterator[Found]:
    system, path = file_system(source)
    try:
        if glob.has_magic(path):
            entries: Mapping[str, Any] = system.glob(path, detail=True)
        else:
            entries = system.find(path, detail=True)
    # Each file system has errors of its own; there is no list of them.
    except Exception as fault:
        raise UnusableArguments(f"{printable(source)}: cannot be listed ({type(fault).__name__}: {fault})") from fault
    if not entries:
        raise UnusableArguments(f"{printable(source)}: nothing is there; check the address")
    for name, entry in entries.items():
        if entry.get("type", "file") == "file" and not name.rsplit("/", 1)[-1].startswith("."):
            yield Found(system.unstrip_protocol(name), *_told(entry), source=source, path=name)


def _told(entry: Mapping[str, Any]) -> tuple[int, int, str]:
    mark = next((str(entry[key]) for key in _MARKS if entry.get(key)), "")
    changed = next((entry[key] for key in _TIMES if entry.get(key)), 0)
    return int(entry.get("size") or 0), _as_ns(changed), mark


def _as_ns(moment: Any) -> int:
    if isinstance(moment, int | float):
        return int(moment * _NS_PER_S)
    if isinstance(moment, str):
        try:
            moment = datetime.fromisoformat(moment)
        except ValueError:
            return 0
    return int(moment.timestamp() * _NS_PER_S) if isinstance(moment, datetime) else 0


def file_system(address: str) -> tuple[Any, str]:
    """File system of an address and the path in it.

    Raises
    ------
    UnusableArguments
        If nothing that is installed knows the scheme.
    """
    scheme = address.split("://", 1)[0]
    try:
        from fsspec.core import url_to_fs
    except ImportError as fault:
        raise UnusableArguments(f"{scheme}:// needs the extra remote: pip install 'rtpaudit[remote]'") from fault
    try:
        system, path = url_to_fs(address)
    except (ValueError, ImportError) as fault:
        raise UnusableArguments(f"{printable(address)}: {fault}") from fault
    return system, str(path)
