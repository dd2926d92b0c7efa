"""gzip, xz and zstd, peeled off before any reader: compressed octets in, pieces of plain ones out.

Several members or frames in a row count as one, as the three formats have it.
"""

import io
import zlib
from collections.abc import Callable, Iterator
from itertools import islice
from typing import BinaryIO

PIECE = 1 << 16
MOST_SINGLE_OCTETS = 1 << 23
"""What is sought behind the last whole piece before a fault, octet by octet."""

MAGIC = {b"\x1f\x8b": "gzip", b"\xfd7zXZ\x00": "xz", b"\x28\xb5\x2f\xfd": "zstd"}


def compression(head: bytes) -> str:
    """Name of the compression that a file's first octets show, empty where there is none."""
    # Frames that hold no data may come first in zstd (RFC 8878, 3.1.2, from memory).
    if len(head) >= 4 and head[0] & 0xF0 == 0x50 and head[1:4] == b"\x2a\x4d\x18":
        return "zstd"
    return next((name for magic, name in MAGIC.items() if head.startswith(magic)), "")


class Feed(io.RawIOBase):
    """The compressed octets, handed out one by one from ``single_from`` on.

    A decoder that fails keeps back what it made of the octets that it was given last; given one, it keeps back nothing.
    """

    def __init__(self, source: BinaryIO, single_from: int) -> None:
        self.source = source
        self.single_from = single_from
        self.position = 0
        source.seek(0)

    def readable(self) -> bool:
        """It is."""
        return True

    def readinto(self, buffer: bytearray | memoryview) -> int:  # type: ignore[override]
        """Fill what may be filled of ``buffer``."""
        most = min(len(buffer), self.single_from - self.position) if self.position < self.single_from else 1
        octets = self.source.read(most)
        buffer[: len(octets)] = octets
        self.position += len(octets)
        return len(octets)


class Plain:
    """All that can be decompressed, as an iterable of pieces of at most ``PIECE`` octets."""

    def __init__(self, source: BinaryIO, name: str) -> None:
        self.fault = ""
        """after the last piece: one clause where the compressed octets ended early or were wrong"""
        self._name = name
        self._source = source
        self._feed = Feed(source, single_from=1 << 62)

    @property
    def taken(self) -> int:
        """Compressed octets used so far."""
        return self._feed.position

    def __iter__(self) -> Iterator[bytes]:
        given = 0
        try:
            for piece in _pieces(READERS[self._name](self._feed), PIECE):
                given += len(piece)
                yield piece
        except _faults() as fault:
            self.fault = _clause(fault)
            yield from self._again(given)

    def _again(self, given: int) -> Iterator[bytes]:
        """What a decoder kept back of the octets before the fault: all from the start, the last of them one by one."""
        self._feed = Feed(self._source, single_from=max(self._feed.position - 2 * PIECE, 0))
        try:
            plain = READERS[self._name](self._feed)
            while given > 0:
                given -= len(plain.read(min(given, PIECE)))
            yield from islice(_pieces(plain, 1), MOST_SINGLE_OCTETS)
        except _faults():
            return


def _gzip(feed: Feed) -> BinaryIO:
    import gzip

    return gzip.GzipFile(fileobj=feed, mode="rb")  # type: ignore[return-value]


def _xz(feed: Feed) -> BinaryIO:
    import lzma

    return lzma.LZMAFile(feed)  # type: ignore[return-value,arg-type]


def _zstd(feed: Feed) -> BinaryIO:
    import pyarrow

    return pyarrow.CompressedInputStream(pyarrow.PythonFile(feed, mode="r"), "zstd")  # type: ignore[no-any-return]


def _faults() -> tuple[type[Exception], ...]:
    import lzma

    # What the three decoders raise; MemoryError where xz asks for a dictionary larger than memory.
    return EOFError, OSError, zlib.error, lzma.LZMAError, MemoryError


def _clause(fault: Exception) -> str:
    text = str(fault).splitlines()[0].rstrip(".") if str(fault) else type(fault).__name__
    return text[:1].lower() + text[1:] if text[1:2].islower() else text


def _pieces(plain: BinaryIO, size: int) -> Iterator[bytes]:
    # One step of the decoder at a time, so that what it made before a fault comes out.
    read: Callable[[int], bytes] = plain.read1  # type: ignore[attr-defined]
    while piece := read(size):
        yield piece


READERS: dict[str, Callable[[Feed], BinaryIO]] = {"gzip": _gzip, "xz": _xz, "zstd": _zstd}
