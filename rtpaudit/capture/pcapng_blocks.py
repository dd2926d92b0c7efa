"""The blocks of a pcapng file that come by the million: packets, and what is passed over.

Every block carries its length at both ends, so a block that is sound is known to be sound, and a search after damage
needs little to believe. Section headers, interface descriptions and statistics are rare, and left to Python.
"""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.fields import u16, u32
from rtpaudit.capture.frames import Octets
from rtpaudit.kernels import kernel

SECTION_HEADER, INTERFACE, STATISTICS = 0x0A0D0D0A, 1, 5
ENHANCED_PACKET, SIMPLE_PACKET, OBSOLETE_PACKET = 6, 3, 2
BYTE_ORDER = 0x1A2B3C4D

COMPLETE, FULL, BROKEN, RARE = range(4)
"""Why the loop stopped; RARE is a block that Python reads."""

# Columns of the table of interfaces, one row each.
UNIT, FACTOR, OFFSET_NS, SNAP_LENGTH, DROPPED = range(5)
MULTIPLY, DIVIDE, HALVE = range(3)
"""A tick is FACTOR ns; FACTOR ticks are a nanosecond; a tick is 2 to the power of minus FACTOR seconds."""

# What the loop remembers and counts: each count is followed by the offset of the first one.
LAST_TIME, CLIPPED, CLIPPED_AT, HOMELESS, HOMELESS_AT, UNTIMED, UNTIMED_AT = range(7)

UNKNOWN_TIME = -1
LATEST_NS = 1 << 62
"""A time stamp past this (in the year 2116) is taken to be this."""


@kernel
def to_ns(high: int, low: int, unit: int, factor: int, offset_ns: int) -> int:
    """A 64-bit time stamp as ns since 1970, rounded down, in whole numbers throughout."""
    ticks = np.uint64(high) << np.uint64(32) | np.uint64(low)
    by = np.uint64(factor)
    latest, per_s = np.uint64(LATEST_NS), np.uint64(1_000_000_000)
    if unit == MULTIPLY:
        ns = min(ticks, latest // by) * by
    elif unit == DIVIDE:
        ns = min(ticks // by, latest)
    elif factor < 32:
        part = (ticks & ((np.uint64(1) << by) - np.uint64(1))) * per_s
        ns = min(ticks >> by, latest // per_s) * per_s + (part >> by)
    else:
        # Seconds end within the upper half or above it; what is left of it times 10^9 has at most 62 bits.
        kept = np.uint64(min(factor - 32, 62))
        seconds = np.uint64(high) >> kept
        part = np.uint64(high) - (seconds << kept)
        ns = seconds * per_s + ((part * per_s + (np.uint64(low) * per_s >> np.uint64(32))) >> kept)
    shifted = int(np.int64(ns)) + offset_ns
    return min(max(shifted, 0), LATEST_NS)


@kernel
def drop_count(octets: Octets, at: int, end: int, big: bool) -> int:
    """The epb_dropcount among the options of an enhanced packet block, 0 where there is none."""
    while at + 12 <= end:
        code, length = u16(octets, at, big), u16(octets, at + 2, big)
        if code == 4 and length == 8:
            return min(u32(octets, at + (8 if big else 4), big), 1 << 31)
        if code == 0:
            return 0
        at += 4 + (length + 3) // 4 * 4
    return 0


@kernel
def note(state: NDArray[np.int64], count: int, at: int) -> None:
    """Count one more of something, and keep where the first was."""
    if state[count] == 0:
        state[count + 1] = at
    state[count] += 1


@kernel
def packet_at(
    octets: Octets,
    position: int,
    end: int,
    sound: bool,
    kind: int,
    big: bool,
    first: int,
    described: int,
    table: NDArray[np.int64],
    state: NDArray[np.int64],
) -> tuple[int, int, int, int]:
    """Interface, first octet, captured and original length of a packet block's frame; interface -1 to leave it out.

    ``end`` is that of the block, without the length in its last four octets. Its time is left in ``state``.
    """
    start = position + (12 if kind == SIMPLE_PACKET else 28)
    room = end - start
    if room < 0:
        note(state, CLIPPED, position)
        return -1, 0, 0, 0
    which = 0
    if kind == ENHANCED_PACKET:
        which = u32(octets, position + 8, big)
    elif kind == OBSOLETE_PACKET:
        which = u16(octets, position + 8, big)
    if which >= described:
        note(state, HOMELESS, position)
        return -1, 0, 0, 0
    which += first
    if kind == SIMPLE_PACKET:
        note(state, UNTIMED, position)
        wire = u32(octets, position + 8, big)
        length = min(wire, table[which, SNAP_LENGTH], room)
    else:
        length, wire = u32(octets, position + 20, big), u32(octets, position + 24, big)
        if length > room and sound:
            note(state, CLIPPED, position)
        length = min(length, room)
        high, low = u32(octets, position + 12, big), u32(octets, position + 16, big)
        state[LAST_TIME] = to_ns(high, low, table[which, UNIT], table[which, FACTOR], table[which, OFFSET_NS])
        after = start + (length + 3) // 4 * 4
        if kind == ENHANCED_PACKET and after < end:
            table[which, DROPPED] += drop_count(octets, after, end, big)
        elif kind == OBSOLETE_PACKET and u16(octets, position + 10, big) < 0xFFFF:
            table[which, DROPPED] += u16(octets, position + 10, big)
    return which, start, length, wire if length <= wire < 1 << 31 else length


@kernel
def index_blocks(
    octets: Octets,
    position: int,
    big: bool,
    trusted: int,
    trusted_end: int,
    first: int,
    described: int,
    table: NDArray[np.int64],
    state: NDArray[np.int64],
    start: NDArray[np.int64],
    captured: NDArray[np.int32],
    original: NDArray[np.int32],
    time_ns: NDArray[np.int64],
    interface: NDArray[np.uint16],
) -> tuple[int, int, int]:
    """Fill the columns from ``position`` on: rows filled, next position, and why it stopped.

    The section's interfaces are the rows ``first`` to ``first + described`` of ``table``. The block at ``trusted`` is
    read up to ``trusted_end``, whatever its lengths say.
    """
    row = 0
    while position < len(octets):
        if position + 12 > len(octets):
            return row, position, BROKEN
        kind, total = u32(octets, position, big), u32(octets, position + 4, big)
        if kind == SECTION_HEADER:
            return row, position, RARE
        end = position + total
        sound = total >= 12 and end <= len(octets) and u32(octets, end - 4, big) == total
        if not sound:
            if position != trusted:
                return row, position, BROKEN
            end = trusted_end
        if kind in (INTERFACE, STATISTICS):
            return row, position, RARE
        if kind in (ENHANCED_PACKET, SIMPLE_PACKET, OBSOLETE_PACKET):
            if row == len(start):
                return row, position, FULL
            body_end = end - 4 if sound else end
            which, begin, length, wire = packet_at(
                octets, position, body_end, sound, kind, big, first, described, table, state
            )
            if which >= 0:
                start[row], captured[row], original[row] = begin, length, wire
                time_ns[row], interface[row] = state[LAST_TIME], which
                row += 1
        position = end
    return row, position, COMPLETE


@kernel
def order_at(octets: Octets, at: int, big: bool) -> bool:
    """Byte order of the block that may begin here: a section header brings its own, others have ``big``."""
    if at + 12 > len(octets) or u32(octets, at, big) != SECTION_HEADER:
        return big
    return big == (u32(octets, at + 8, big) == BYTE_ORDER)


@kernel
def block_end(octets: Octets, at: int, big: bool) -> int:
    """End of the block that may begin here, -1 where none can."""
    if at + 12 > len(octets):
        return -1
    big = order_at(octets, at, big)
    kind = u32(octets, at, big)
    if kind == SECTION_HEADER:
        if u32(octets, at + 8, big) != BYTE_ORDER:
            return -1
    # Numbers given out so far are small, but for the custom blocks.
    elif kind == 0 or (kind >= 0x1000 and kind & 0xBFFFFFFF != 0x00000BAD):
        return -1
    total = u32(octets, at + 4, big)
    if total < 12:
        return -1
    end = at + total
    return end if end > len(octets) or u32(octets, end - 4, big) == total else -1


@kernel
def find_block(octets: Octets, position: int, big: bool) -> int:
    """First position from here on at which a whole block lies, followed by another or by the end; -1 if none."""
    for at in range(position, len(octets) - 11):
        end = block_end(octets, at, big)
        if end == len(octets):
            return at
        if 0 <= end < len(octets) and block_end(octets, end, order_at(octets, at, big)) >= 0:
            return at
    return -1
