"""Files that appear whole or not at all, are on the disk when a function returns, and are their owner's only."""

import errno
import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from rtpaudit.errors import UnusableOutput
from rtpaudit.nightly.lock import OWNER_ONLY

if TYPE_CHECKING:
    import pyarrow as pa

OWNER_ONLY_FOLDER = 0o700


@contextmanager
def told(place: Path) -> Iterator[None]:
    """Faults of the disk as one sentence each."""
    try:
        yield
    except OSError as fault:
        if fault.errno in (errno.ENOSPC, errno.EDQUOT):
            raise UnusableOutput(
                f"{place}: the disk is full; the store holds all that was committed before: free some space, run again"
            ) from fault
        raise UnusableOutput(f"{place}: cannot be used: {fault.strerror or fault}; choose another --store") from fault


def make_folder(folder: Path) -> None:
    """A folder, unless it is there."""
    folder.mkdir(OWNER_ONLY_FOLDER, parents=True, exist_ok=True)


def subfolders(folder: Path) -> list[Path]:
    """Folders in a folder, in order of their names; none where it is not there."""
    try:
        return sorted(one for one in folder.iterdir() if one.is_dir())
    except FileNotFoundError:
        return []


def write_new(path: Path, octets: bytes) -> None:
    """A file with these octets at a place that nobody reads yet."""
    handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_TRUNC, OWNER_ONLY)
    with open(handle, "wb") as file:
        file.write(octets)
        file.flush()
        os.fsync(file.fileno())


def write_whole(path: Path, octets: bytes) -> None:
    """A file under another name, then put in its place."""
    partial = path.with_name(f".{path.name}.{os.getpid()}")
    try:
        write_new(partial, octets)
        os.replace(partial, path)
    except OSError:
        partial.unlink(missing_ok=True)
        raise
    sync_folder(path.parent)


def parquet_octets(table: "pa.Table") -> bytes:
    """A table as the octets of a Parquet file."""
    import pyarrow as pa
    from pyarrow import parquet

    sink = pa.BufferOutputStream()
    parquet.write_table(table, sink, compression="zstd")
    return sink.getvalue().to_pybytes()  # type: ignore[no-any-return]


def sync_folder(folder: Path) -> None:
    """Have the names in a folder on the disk, where the system can."""
    if os.name != "posix":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
