"""What pcapng blocks say of interfaces: descriptions, resolutions, statistics."""

import struct

from rtpaudit.capture import pcapng_blocks as blocks
from rtpaudit.capture.damage import printable
from rtpaudit.capture.frames import Interface
from rtpaudit.units import NS_PER_S

MOST_OPTIONS = 1000
NO_LIMIT = 1 << 31
"""Snap length of an interface that states none."""
UNKNOWN_LINK_TYPE = 0xFFFF
"""Of an interface whose description is too short to name one."""

# Option codes of the interface description and of the interface statistics.
IF_NAME, IF_TSRESOL, IF_TSOFFSET = 2, 9, 14
ISB_IFRECV, ISB_IFDROP, ISB_OSDROP = 4, 5, 7

TimeUnit = tuple[int, int, int]
"""Columns UNIT, FACTOR and OFFSET_NS of the table of interfaces."""


def options(octets: bytes, big: bool) -> dict[int, bytes]:
    """Option values by code, the last of each; ends at what is cut, and after ``MOST_OPTIONS``."""
    found: dict[int, bytes] = {}
    at = 0
    for _ in range(MOST_OPTIONS):
        if at + 4 > len(octets):
            break
        code, length = struct.unpack_from(">HH" if big else "<HH", octets, at)
        if code == 0 or at + 4 + length > len(octets):
            break
        found[code] = octets[at + 4 : at + 4 + length]
        at += 4 + (length + 3) // 4 * 4
    return found


def describe(body: bytes, big: bool) -> tuple[Interface, TimeUnit]:
    """The interface of an interface description block, and how its time stamps count."""
    if len(body) < 8:
        return Interface(UNKNOWN_LINK_TYPE), time_unit({}, big)
    link_type, snap_length = struct.unpack_from(">HxxI" if big else "<HxxI", body)
    found = options(body[8:], big)
    name = printable(found.get(IF_NAME, b"").rstrip(b"\x00").decode("utf-8", "replace"))
    return Interface(link_type, name, snap_length), time_unit(found, big)


def time_unit(found: dict[int, bytes], big: bool) -> TimeUnit:
    """if_tsresol and if_tsoffset; microseconds since 1970 where they are absent."""
    resolution = found.get(IF_TSRESOL, b"\x06")[:1] or b"\x06"
    offset = found.get(IF_TSOFFSET, b"")
    offset_s = struct.unpack(">q" if big else "<q", offset)[0] if len(offset) == 8 else 0
    bound_s = blocks.LATEST_NS // NS_PER_S
    offset_ns = min(max(offset_s, -bound_s), bound_s) * NS_PER_S
    exponent = resolution[0] & 0x7F
    if resolution[0] & 0x80:
        return blocks.HALVE, exponent, offset_ns
    if exponent <= 9:
        return blocks.MULTIPLY, 10 ** (9 - exponent), offset_ns
    if exponent <= 27:
        return blocks.DIVIDE, 10 ** (exponent - 9), offset_ns
    # So fine that all 64 bits of a time stamp make less than 2 ns: the finest of the other kind, which makes none.
    return blocks.HALVE, 127, offset_ns


def statistics(body: bytes, big: bool) -> tuple[int, int | None, int | None]:
    """Interface, frames received and frames dropped of an interface statistics block, None where it does not say."""
    if len(body) < 12:
        return -1, None, None
    (interface,) = struct.unpack_from(">I" if big else "<I", body)
    found = options(body[12:], big)
    received = count(found.get(ISB_IFRECV, b""), big)
    drops = [count(found.get(code, b""), big) for code in (ISB_IFDROP, ISB_OSDROP)]
    known = [drop for drop in drops if drop is not None]
    return interface, received, sum(known) if known else None


def count(octets: bytes, big: bool) -> int | None:
    """A 64-bit count; None where it is absent, or so large that it can only mean "unknown"."""
    if len(octets) != 8:
        return None
    number: int = struct.unpack(">Q" if big else "<Q", octets)[0]
    return number if number < 1 << 62 else None
