"""Frames come in, octets of a pcapng file go out: one section, an interface for each that was, times to the nanosecond.

Blocks and options are those that the reader of this room knows (pcapng_blocks.py, pcapng_options.py).
"""

import struct
from typing import BinaryIO

from rtpaudit.capture.frames import Interface
from rtpaudit.capture.pcapng_blocks import BYTE_ORDER, ENHANCED_PACKET, INTERFACE, SECTION_HEADER, STATISTICS
from rtpaudit.capture.pcapng_options import IF_NAME, IF_TSRESOL, ISB_IFDROP, ISB_IFRECV

APPLICATION = 4
"""shb_userappl: what wrote the section"""
NANOSECONDS = b"\x09"
LONGEST_NAME = 1024


def section_header(application: str) -> bytes:
    """How a file of this writer begins: a section of unknown length, written by ``application``."""
    body = struct.pack("<IHHq", BYTE_ORDER, 1, 0, -1)
    return _block(SECTION_HEADER, body + _options([(APPLICATION, application.encode())]))


class PcapngWriter:
    """Writes frames to a file that is open for writing."""

    def __init__(self, file: BinaryIO, application: str) -> None:
        self._file = file
        self._interfaces = 0
        file.write(section_header(application))

    def interface(self, one: Interface) -> int:
        """Describe one more interface; its number in this file."""
        head = struct.pack("<HHI", one.link_type, 0, min(one.snap_length, 0xFFFFFFFF))
        name = one.name.encode("utf-8", "replace")[:LONGEST_NAME]
        named = [(IF_NAME, name)] if name else []
        self._file.write(_block(INTERFACE, head + _options([*named, (IF_TSRESOL, NANOSECONDS)])))
        self._interfaces += 1
        return self._interfaces - 1

    def frame(self, interface: int, time_ns: int, octets: bytes, original: int) -> None:
        """One frame as it was captured; ``original`` is its length on the wire. [octets]"""
        head = struct.pack("<IIIII", interface, time_ns >> 32, time_ns & 0xFFFFFFFF, len(octets), original)
        self._file.write(_block(ENHANCED_PACKET, head + octets))

    def statistics(self, interface: int, time_ns: int, received: int | None, dropped: int | None) -> None:
        """What the capture host counted on an interface; nothing where it counted nothing."""
        counted = [
            (code, count) for code, count in ((ISB_IFRECV, received), (ISB_IFDROP, dropped)) if count is not None
        ]
        if counted:
            body = struct.pack("<III", interface, time_ns >> 32, time_ns & 0xFFFFFFFF)
            self._file.write(_block(STATISTICS, body + _options([(code, struct.pack("<Q", n)) for code, n in counted])))


def _block(kind: int, body: bytes) -> bytes:
    """Type, length, body padded to 32 bits, and the length again."""
    padding = -len(body) % 4
    length = struct.pack("<I", 12 + len(body) + padding)
    return b"".join((struct.pack("<I", kind), length, body, bytes(padding), length))


def _options(options: list[tuple[int, bytes]]) -> bytes:
    parts = [struct.pack("<HH", code, len(value)) + value + bytes(-len(value) % 4) for code, value in options]
    return b"".join(parts) + bytes(4)
