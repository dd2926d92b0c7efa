"""A lock on a file, which the system takes away with the process that holds it."""

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

if sys.platform == "win32":
    import msvcrt

    def _take(handle: int, wait: bool) -> None:
        os.lseek(handle, 0, os.SEEK_SET)
        msvcrt.locking(handle, msvcrt.LK_LOCK if wait else msvcrt.LK_NBLCK, 1)

else:
    import fcntl

    def _take(handle: int, wait: bool) -> None:
        fcntl.flock(handle, fcntl.LOCK_EX | (0 if wait else fcntl.LOCK_NB))


OWNER_ONLY = 0o600


@contextmanager
def locked(path: Path) -> Iterator[None]:
    """Hold the lock of a file, waiting for it as long as it takes."""
    handle = os.open(path, os.O_RDWR | os.O_CREAT, OWNER_ONLY)
    try:
        _take(handle, wait=True)
        yield
    finally:
        os.close(handle)


def hold(path: Path) -> int:
    """Take the lock of a new file and keep it until the handle is closed, or the process is gone."""
    handle = os.open(path, os.O_RDWR | os.O_CREAT, OWNER_ONLY)
    _take(handle, wait=True)
    return handle


def is_held(path: Path) -> bool:
    """Whether some process holds the lock of a file."""
    try:
        handle = os.open(path, os.O_RDWR)
    except FileNotFoundError:
        return False
    try:
        _take(handle, wait=False)
    except OSError:
        return True
    finally:
        os.close(handle)
    return False
