"""pcap: records one after another, in both byte orders, with micro- or nanoseconds.

A file header of 24 octets, then records of 16 octets of header and the frame. Nothing marks where a record begins, so
after damage the reader looks for the next run of headers that fit one another.
"""

import struct
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.columns import FrameColumns
from rtpaudit.capture.damage import DamageLog, octets_text
from rtpaudit.capture.fields import u32
from rtpaudit.capture.frames import Frames, Interface, Octets
from rtpaudit.kernels import kernel
from rtpaudit.units import NS_PER_S

FILE_HEADER = 24
RECORD_HEADER = 16
LONGEST_FRAME = 1 << 20
"""Octets. The longest aggregated frames that network cards hand up have half of this (common practice)."""

# Records that have to fit one another before a search believes them, and how far apart their times may be.
RUN = 3
WEEK_S = 7 * 86_400

COMPLETE, FULL, BROKEN, CUT = range(4)

# First four octets: big-endian, nanoseconds per tick.
MAGIC = {
    b"\xd4\xc3\xb2\xa1": (False, 1000),
    b"\xa1\xb2\xc3\xd4": (True, 1000),
    b"\x4d\x3c\xb2\xa1": (False, 1),
    b"\xa1\xb2\x3c\x4d": (True, 1),
}


@kernel
def goes_on(octets: Octets, at: int, big: bool, near_s: int) -> bool:
    """Whether the file ends here, or a record begins that may follow one of the time ``near_s``."""
    if at + RECORD_HEADER > len(octets):
        return at <= len(octets)
    return u32(octets, at + 8, big) <= LONGEST_FRAME and abs(u32(octets, at, big) - near_s) <= WEEK_S


@kernel
def index_records(
    octets: Octets,
    position: int,
    big: bool,
    tick_ns: int,
    last_s: int,
    start: NDArray[np.int64],
    captured: NDArray[np.int32],
    original: NDArray[np.int32],
    time_ns: NDArray[np.int64],
) -> tuple[int, int, int]:
    """Fill the columns from ``position`` on: rows filled, next position, and why it stopped.

    ``last_s`` is the time of the record before, -1 where there is none. A header with a strange time or length counts
    only if the next record bears it out. The header after the last row has been looked at too, so that a batch never
    ends on a record that the next one contradicts.
    """
    row = 0
    while position < len(octets):
        if position + RECORD_HEADER > len(octets):
            return row, position, CUT
        length = u32(octets, position + 8, big)
        wire = u32(octets, position + 12, big)
        # Length 0 on the wire too: the zeros of a file that was laid out and not written.
        if length > LONGEST_FRAME or length + wire == 0:
            return row, position, BROKEN
        seconds, ticks = u32(octets, position, big), u32(octets, position + 4, big)
        after = position + RECORD_HEADER + length
        strange = (last_s >= 0 and abs(seconds - last_s) > WEEK_S) or ticks * tick_ns >= NS_PER_S or length > wire
        if strange and not goes_on(octets, after, big, seconds):
            return row, position, BROKEN
        if row == len(start):
            return row, position, FULL
        if after > len(octets):
            return row, position, CUT
        start[row] = position + RECORD_HEADER
        captured[row] = length
        original[row] = wire if length <= wire <= LONGEST_FRAME else length
        time_ns[row] = seconds * NS_PER_S + ticks * tick_ns
        last_s = seconds
        row += 1
        position = after
    return row, position, COMPLETE


@kernel
def record_end(octets: Octets, at: int, big: bool, ticks_per_s: int, near_s: int) -> int:
    """End of the record whose header may begin here, -1 where it cannot."""
    if at + RECORD_HEADER > len(octets):
        return -1
    length = u32(octets, at + 8, big)
    wire = u32(octets, at + 12, big)
    if length == 0 or length > wire or wire > LONGEST_FRAME or u32(octets, at + 4, big) >= ticks_per_s:
        return -1
    return at + RECORD_HEADER + length if abs(u32(octets, at, big) - near_s) <= WEEK_S else -1


@kernel
def find_run(octets: Octets, position: int, big: bool, ticks_per_s: int, near_s: int) -> int:
    """First position from here on at which records follow one another, or reach the end of the file; -1 if none.

    ``near_s`` is the time of the last good record, -1 where there was none.
    """
    for candidate in range(position, len(octets) - RECORD_HEADER):
        anchor = near_s if near_s >= 0 else u32(octets, candidate, big)
        at = candidate
        for seen in range(RUN):
            at = record_end(octets, at, big, ticks_per_s, anchor)
            if at < 0:
                break
            # The last record may be cut short, but one alone that leads past the end proves nothing.
            if at == len(octets) or (seen > 0 and at > len(octets) - RECORD_HEADER) or seen == RUN - 1:
                return candidate
            if at > len(octets):
                break
    return -1


class PcapReader:
    """One pass over a pcap file."""

    def __init__(self, octets: Octets, damage: DamageLog) -> None:
        self.octets = octets
        self.damage = damage
        self.position = FILE_HEADER
        head = octets[:FILE_HEADER].tobytes()
        self.big, self.tick_ns = MAGIC[head[:4]]
        snap_length, network = struct.unpack_from(">II" if self.big else "<II", head, 16)
        # The upper half of the field holds the length of the frame check sequence, which decoders find by themselves.
        self.interfaces = [Interface(network & 0xFFFF, snap_length=snap_length)]
        self._last_s = -1

    def batches(self, size: int) -> Iterator[Frames]:
        """Frames in file order, at most ``size`` at a time, one more where a damaged record was kept."""
        first_number = 1
        while self.position < len(self.octets):
            columns = FrameColumns(min(size, (len(self.octets) - self.position) // RECORD_HEADER + 1))
            self._fill(columns)
            if columns.rows:
                yield columns.frames(self.octets, self.interfaces, first_number)
            first_number += columns.rows

    def last_time_ns(self, tail: int) -> int | None:
        """Latest time among the records behind ``tail``, None where they do not lead to the end of the file."""
        self.position = find_run(self.octets, tail, self.big, NS_PER_S // self.tick_ns, -1)
        if self.position < 0:
            return None
        columns = FrameColumns((len(self.octets) - self.position) // RECORD_HEADER + 1)
        self._last_s = -1
        self._fill(columns)
        return columns.latest_ns() if self.damage.only_from(columns.last_start() - RECORD_HEADER) else None

    def _fill(self, columns: FrameColumns) -> None:
        while True:
            rows, self.position, stopped = index_records(
                self.octets, self.position, self.big, self.tick_ns, self._last_s, *columns.free()[:4]
            )
            columns.rows += rows
            if columns.rows:
                self._last_s = int(columns.time_ns[columns.rows - 1]) // NS_PER_S
            if stopped in (COMPLETE, FULL):
                return
            self._mend(columns, stopped)

    def _mend(self, columns: FrameColumns, stopped: int) -> None:
        """Go on at the next run of records; it may begin within the frame before, whose length is wrong then."""
        broken = self.position
        doubtful = stopped == BROKEN and columns.rows > 0
        before = int(columns.start[columns.rows - 1]) if doubtful else broken + RECORD_HEADER
        found = find_run(self.octets, before + 1, self.big, NS_PER_S // self.tick_ns, self._last_s)
        end = len(self.octets) if found < 0 else found
        if end < broken or (doubtful and found - before == columns.original[columns.rows - 1]):
            columns.end_last(end, self._header(before - RECORD_HEADER)[3])
            self.damage.add(before - RECORD_HEADER, self._what(before - RECORD_HEADER, found), "nothing")
        elif not self._keep(columns, broken, end, found):
            self.damage.add(broken, self._what(broken, found), octets_text(end - broken))
        self.position = end

    def _what(self, broken: int, found: int) -> str:
        if broken + RECORD_HEADER > len(self.octets):
            return "the file ends within a record header"
        length = self._header(broken)[2]
        if length > LONGEST_FRAME:
            return f"a record with the impossible length {length:,}"
        if found >= 0:
            return f"a record of {octets_text(length)} that does not fit what follows"
        if broken + RECORD_HEADER + length > len(self.octets):
            return f"the file ends within a record of {octets_text(length)}"
        return "octets that are no record"

    def _header(self, at: int) -> tuple[int, int, int, int]:
        head = self.octets[at : at + RECORD_HEADER].tobytes()
        seconds, ticks, length, wire = struct.unpack(">IIII" if self.big else "<IIII", head)
        return seconds, ticks, length, wire

    def _keep(self, columns: FrameColumns, broken: int, end: int, found: int) -> bool:
        """Keep the frame of a record whose length is wrong or whose end is missing, if its header is sound else."""
        held = end - broken - RECORD_HEADER
        if held < 1:
            return False
        seconds, ticks, length, wire = self._header(broken)
        near = self._last_s < 0 or abs(seconds - self._last_s) <= WEEK_S
        if not (near and held <= wire <= LONGEST_FRAME and ticks * self.tick_ns < NS_PER_S):
            return False
        missing = min(length, wire) - held
        lost = f"{octets_text(missing)} of this frame" if missing > 0 else "nothing"
        self.damage.add(broken, self._what(broken, found), lost)
        columns.append(broken + RECORD_HEADER, held, wire, seconds * NS_PER_S + ticks * self.tick_ns)
        return True
