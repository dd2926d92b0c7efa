"""What cannot be mapped where it is, laid down in an unnamed temporary file."""

import errno
import tempfile
from collections.abc import Callable, Iterable
from shutil import disk_usage
from typing import BinaryIO, cast

FREE_OCTETS = 64 << 20
"""What is left free on the disk of temporary files."""
CHECK_EVERY = 16 << 20
MOST_TIMES = 500
FREE_TIMES_FROM = 256 << 20
"""A compressed file that grows to more than ``MOST_TIMES`` its size, past so many octets, is made to fill a disk."""


def spool(pieces: Iterable[bytes], taken: Callable[[], int] | None = None) -> tuple[BinaryIO, int, str]:
    """A temporary file of the pieces, its length, and one clause where it had to stop before the last.

    ``taken`` tells how many compressed octets the pieces have used so far.
    """
    file = _temporary()
    length = checked = 0
    try:
        for piece in pieces:
            if length >= checked:
                if disk_usage(tempfile.gettempdir()).free < FREE_OCTETS + CHECK_EVERY:
                    return file, length, "the disk of temporary files is nearly full"
                checked += CHECK_EVERY
            if taken is not None and length > FREE_TIMES_FROM and length > MOST_TIMES * taken():
                return file, length, f"the file grows to more than {MOST_TIMES} times its size"
            written = file.write(piece)
            length += written
            if written < len(piece):
                return file, length, "the disk of temporary files is full"
    except OSError as fault:
        return file, length, f"copying to a temporary file stopped ({fault.strerror or fault})"
    return file, length, ""


def _temporary() -> BinaryIO:
    try:
        # Without a buffer of its own: closing it must not fail for octets that found no room.
        return cast(BinaryIO, tempfile.TemporaryFile(buffering=0))
    except OSError:
        raise OSError(errno.EIO, "no folder for temporary files can be written; TMPDIR names another") from None
