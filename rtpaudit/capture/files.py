"""One capture file: found readable, mapped, and read in batches of frames."""

import errno
import mmap
import os
import stat
import sys
from collections.abc import Iterator
from itertools import chain
from pathlib import Path
from typing import BinaryIO, Protocol

import numpy as np

from rtpaudit.capture.compressed import PIECE, Plain, compression
from rtpaudit.capture.damage import DamageLog, printable
from rtpaudit.capture.frames import Damage, Frames, Interface, Octets
from rtpaudit.capture.recognise import HEAD, container_of, refusal
from rtpaudit.capture.spool import spool
from rtpaudit.errors import UnreadableCapture
from rtpaudit.units import NS_PER_S

BATCH = 262_144
STANDARD_INPUT = "-"

TAIL = 8 << 20
"""Octets at the end of a file that tell when it ends."""
MOST_SPAN_NS = 30 * 86_400 * NS_PER_S
"""A file that seems to last longer is read whole before it is believed."""


class Reader(Protocol):
    """One pass over a file."""

    interfaces: list[Interface]
    position: int
    damage: DamageLog

    def batches(self, size: int) -> Iterator[Frames]:
        """Frames in file order."""

    def last_time_ns(self, tail: int) -> int | None:
        """Latest time behind an offset, None where that cannot be told."""


class CaptureFile:
    """A capture of which something can be read. Its size is that at which it was opened, should it grow."""

    def __init__(self, path: str, name: str, container: str, octets: Octets, damage: list[Damage]) -> None:
        self.path = path
        self.name = name
        """base name, as it goes into tables"""
        self.container = container
        """``pcap`` or ``pcapng``; empty for a file that stands only for its damage"""
        self.octets = octets
        """the whole file, decompressed, as a read-only map"""
        self.interfaces: list[Interface] = []
        """described so far; complete after the last batch"""
        self.damage = damage
        """met so far, each once however often the file is read; complete after the last batch"""
        self._before = list(damage)
        self._furthest = -1

    def batches(self, size: int = BATCH) -> Iterator[Frames]:
        """Frames in file order, ``size`` at a time. Each call starts again from the first."""
        if not self.container:
            return
        reader = self._reader()
        for frames in reader.batches(size):
            self._learn(reader)
            yield frames
        self._learn(reader)

    def span_ns(self) -> tuple[int, int] | None:
        """First and last time, None where there is no frame. A long file is not read but for its two ends."""
        reader = self._reader()
        first = next(reader.batches(1), None)
        if first is not None and len(self.octets) > 4 * TAIL:
            self.interfaces = list(reader.interfaces)
            began = int(first.time_ns[0])
            ended = reader.last_time_ns(len(self.octets) - TAIL)
            if ended is not None and 0 <= ended - began <= MOST_SPAN_NS:
                return began, ended
        spans = [(int(frames.time_ns.min()), int(frames.time_ns.max())) for frames in self.batches()]
        return (min(began for began, _ in spans), max(ended for _, ended in spans)) if spans else None

    def _reader(self) -> Reader:
        # The readers hold kernels, and who only wants the types of this room does without numba.
        if self.container == "pcap":
            from rtpaudit.capture.pcap import PcapReader

            return PcapReader(self.octets, DamageLog(self.name))
        from rtpaudit.capture.pcapng import PcapngReader

        return PcapngReader(self.octets, DamageLog(self.name))

    def _learn(self, reader: Reader) -> None:
        if reader.position >= self._furthest:
            self._furthest = reader.position
            self.interfaces = reader.interfaces
            self.damage[:] = self._before + reader.damage.rows


def base_name(path: str) -> str:
    """Name of a capture in tables."""
    return "stdin" if path == STANDARD_INPUT else printable(Path(path).name) or printable(path)


def shown(path: str) -> str:
    """A path as messages name it."""
    return "standard input" if path == STANDARD_INPUT else printable(path)


def open_file(path: str) -> CaptureFile:
    """Open one capture.

    Raises
    ------
    UnreadableCapture
        If nothing at all can be read: the sentence names the file, and what to do.
    """
    log = DamageLog(base_name(path))
    try:
        with _seekable(path, log) as source:
            name = compression(source.read(HEAD))
            if not name:
                octets = _map_capture(path, source)
            else:
                with _peeled(path, source, name, log) as plain:
                    octets = _map_capture(path, plain, f"decompressed by {name}, it ")
    except OSError as fault:
        raise UnreadableCapture(f"{shown(path)}: {why(fault)}") from None
    return CaptureFile(path, log.capture, container_of(octets[:HEAD].tobytes()), octets, log.rows)


def why(fault: OSError) -> str:
    """One clause on a file that cannot be opened, and what to do."""
    if isinstance(fault, FileNotFoundError):
        return "there is no such file: check the spelling and the folder"
    if isinstance(fault, IsADirectoryError):
        return "is a folder: name the capture files in it"
    if isinstance(fault, PermissionError):
        return "may not be read by this user: change its permissions, or copy it as its owner"
    if fault.errno in (errno.EMFILE, errno.ENFILE):
        return "is one file too many to have open at a time: raise the limit (ulimit -n), or give fewer"
    return f"cannot be read ({fault.strerror or fault}): check the disk, or copy the file elsewhere"


def _seekable(path: str, log: DamageLog) -> BinaryIO:
    """The file itself, or a copy of what can be read only once."""
    if path == STANDARD_INPUT:
        stream: BinaryIO | None = getattr(sys.stdin, "buffer", None)
        if stream is None or stream.isatty():
            raise UnreadableCapture("standard input: brings no capture: redirect or pipe one into it")
        return _copy(path, stream, log)
    if "\0" in path:
        raise UnreadableCapture(f"{shown(path)}: cannot be the name of a file: check the spelling")
    source = open(path, "rb")  # noqa: SIM115
    if stat.S_ISREG(os.fstat(source.fileno()).st_mode):
        return source
    with source:
        return _copy(path, source, log)


def _copy(path: str, stream: BinaryIO, log: DamageLog) -> BinaryIO:
    first = stream.read(PIECE)
    if not compression(first):
        _accept(path, first, len(first))
    spooled, length, stopped = spool(chain([first], iter(lambda: stream.read(PIECE), b"")))
    if stopped:
        log.add(length, stopped, "all that follows")
    spooled.seek(0)
    return spooled


def _peeled(path: str, source: BinaryIO, name: str, log: DamageLog) -> BinaryIO:
    """A file of the plain octets, known to begin a capture."""
    plain = Plain(source, name)
    pieces = iter(plain)
    first = next(pieces, b"")
    if plain.fault and not first:
        raise UnreadableCapture(f"{shown(path)}: is broken from the start of its {name} ({plain.fault}): copy it again")
    # Before the disk is filled with what is no capture.
    _accept(path, first, len(first) and PIECE, f"decompressed by {name}, it ")
    spooled, length, stopped = spool(chain([first], pieces), lambda: plain.taken)
    if stopped or plain.fault:
        log.add(length, f"{name}: {stopped or plain.fault}", "all that follows")
    return spooled


def _accept(path: str, head: bytes, length: int, prefix: str = "") -> None:
    reason = refusal(head, length)
    if reason:
        raise UnreadableCapture(f"{shown(path)}: {prefix}{reason}")


def _map_capture(path: str, source: BinaryIO, prefix: str = "") -> Octets:
    source.seek(0)
    _accept(path, source.read(HEAD), os.fstat(source.fileno()).st_size, prefix)
    if sys.version_info >= (3, 13):
        octets = mmap.mmap(source.fileno(), 0, access=mmap.ACCESS_READ, trackfd=False)
    else:
        octets = mmap.mmap(source.fileno(), 0, access=mmap.ACCESS_READ)
    if hasattr(mmap, "MADV_SEQUENTIAL"):
        octets.madvise(mmap.MADV_SEQUENTIAL)
    return np.frombuffer(octets, np.uint8)
