"""Redundant audio (RFC 2198): packets with copies of earlier ones come in, their primary blocks and the lost go out.

The primary block takes the place of the packet's payload. A copy is of use where the packet that it copies is missing:
by its timestamp offset, or by its place among the copies, it is known which that was.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Octets
from rtpaudit.media.meaning import Meaning
from rtpaudit.media.numbering import Numbering
from rtpaudit.media.rtp import Groups, RtpRows
from rtpaudit.media.streams import StreamPackets

MOST_COPIES = 8
"""in one packet; RFC 2198, 3: several are rarely necessary"""
SOUND_SHARE = 0.9
"""Of a group's packets that have to unpack: encrypted ones do by chance alone."""
RED = "red"

_HEADER, _LAST = 4, 1
"""octets of the header of a copy, and of the one of the primary block, which ends the headers"""


@dataclass(frozen=True, slots=True)
class Copies:
    """Redundant blocks of shape (blocks,), in order of arrival, the oldest of a packet first."""

    row: NDArray[np.int64]
    """of the packet that brought it"""
    back: NDArray[np.int64]
    """its place before the primary block, 1 for the one next to it"""
    offset: NDArray[np.int64]
    """how far its timestamp lies before the packet's [ticks]"""
    payload_type: NDArray[np.uint8]
    start: NDArray[np.int64]
    length: NDArray[np.int32]
    captured: NDArray[np.int32]

    def __len__(self) -> int:
        return len(self.row)

    def those(self, chosen: NDArray[np.bool_] | NDArray[np.int64]) -> "Copies":
        """Some of them."""
        return Copies(*(getattr(self, name)[chosen] for name in self.__slots__))


NO_ROWS = np.empty(0, np.int64)
_CHANGED = ("payload_type", "start", "length", "captured")
"""columns that the primary block takes over"""


def unpack(groups: Groups, meanings: Sequence[Meaning], buffers: Sequence[Octets]) -> tuple[Groups, dict[int, Copies]]:
    """The groups with the primary block as payload of each redundant packet, and the copies by group.

    A group stays as it is where too many packets do not hold together: they are encrypted, or something else.
    """
    found: dict[int, Copies] = {}
    rows = groups.rows
    for group, meaning in enumerate(meanings):
        types = [number for number, encoding in meaning.encodings.items() if encoding.name == RED]
        span = slice(int(groups.bounds[group]), int(groups.bounds[group + 1]))
        chosen = span.start + np.flatnonzero(np.isin(rows.payload_type[span], types)) if types else NO_ROWS
        if not len(chosen):
            continue
        good, primary, copies = _read(rows, chosen, buffers)
        if good.mean() < SOUND_SHARE:
            continue
        if not found:
            # Columns that were handed in stay as they are.
            rows = replace(rows, **{name: getattr(rows, name).copy() for name in _CHANGED})
        for name in _CHANGED:
            getattr(rows, name)[chosen[good]] = getattr(primary, name)[good]
        found[group] = copies
    return replace(groups, rows=rows), found


def _read(
    rows: RtpRows, chosen: NDArray[np.int64], buffers: Sequence[Octets]
) -> tuple[NDArray[np.bool_], Copies, Copies]:
    """Which packets hold together (RFC 2198, 3), the primary block of each chosen one, and the copies of the good."""
    n = len(chosen)
    at, left = np.zeros(n, np.int64), np.full(n, -1, np.int64)
    last_type = np.zeros(n, np.uint8)
    found: list[tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]] = []
    going = np.arange(n)
    for _ in range(MOST_COPIES + 1):
        going = going[at[going] + _LAST <= rows.captured[chosen[going]]]
        first = _octet(rows, chosen[going], at[going], buffers)
        ends = first < 0x80
        left[going[ends]], last_type[going[ends]] = at[going[ends]] + _LAST, first[ends]
        going, first = going[~ends], first[~ends]
        there = at[going] + _HEADER <= rows.captured[chosen[going]]
        going, first = going[there], first[there]
        if not len(going):
            break
        second, third, fourth = (_octet(rows, chosen[going], at[going] + k, buffers) for k in (1, 2, 3))
        offset, length = second << 6 | third >> 2, (third & 3) << 8 | fourth
        found.append((going, np.stack([first & 0x7F, offset, length]), np.full(len(going), len(found))))
        at[going] += _HEADER
    packet = np.concatenate([np.empty(0, np.int64), *(one[0] for one in found)])
    columns = np.concatenate([np.empty((3, 0), np.int64), *(one[1] for one in found)], axis=1)
    level = np.concatenate([np.empty(0, np.int64), *(one[2] for one in found)])
    order = np.lexsort((level, packet))
    packet, columns, level = packet[order], columns[:, order], level[order]
    held = np.bincount(packet, columns[2], n).astype(np.int64)
    good = (left >= 0) & (left + held <= rows.length[chosen])
    counts = np.bincount(packet, minlength=n)
    # Blocks lie behind the headers in the order of these: each begins where those before it end.
    before = np.cumsum(columns[2]) - columns[2]
    before -= np.repeat(np.concatenate([[0], np.cumsum(held)])[:-1], counts)
    inside = left[packet] + before
    copies = _blocks(rows, chosen[packet], inside, columns[2], counts[packet] - level, columns[1], columns[0])
    rest = rows.length[chosen] - left - held
    primary = _blocks(rows, chosen, left + held, rest, np.zeros(n, np.int64), np.zeros(n, np.int64), last_type)
    return good, primary, copies.those(good[packet])


def _octet(
    rows: RtpRows, row: NDArray[np.int64], at: NDArray[np.int64], buffers: Sequence[Octets]
) -> NDArray[np.int64]:
    """One octet of the payload of each row."""
    found = np.empty(len(row), np.int64)
    for buffer in np.unique(rows.buffer[row]).tolist():
        mine = rows.buffer[row] == buffer
        found[mine] = buffers[buffer][rows.start[row[mine]] + at[mine]]
    return found


def _blocks(
    rows: RtpRows,
    row: NDArray[np.int64],
    inside: NDArray[np.int64],
    length: NDArray[np.int64],
    back: NDArray[np.int64],
    offset: NDArray[np.int64],
    payload_type: NDArray[np.int64] | NDArray[np.uint8],
) -> Copies:
    """Blocks that begin so many octets inside the payload of a row."""
    there = np.clip(rows.captured[row] - inside, 0, np.maximum(length, 0))
    return Copies(
        row, back, offset, payload_type.astype(np.uint8), rows.start[row] + inside, length.astype(np.int32),
        there.astype(np.int32),
    )  # fmt: skip


def of_lost(copies: Copies, numbering: Numbering, span: slice, step_ticks: int) -> tuple[Copies, NDArray[np.int64]]:
    """Copies of packets that are missing, the earliest of each, and the extended sequence numbers of these.

    Parameters
    ----------
    copies : Copies
        Of one group.
    numbering : Numbering
        Of all groups; ``span`` are the rows of this one.
    step_ticks : int
        Timestamp step of most packets, 0 where unknown. [ticks]
    """
    known = _Received(numbering, span, step_ticks)
    segment, carrier = numbering.segment[copies.row], numbering.extended[copies.row]
    ticks = numbering.media_ticks[copies.row] - copies.offset
    # A sender may copy not the packet before but an earlier one; then the time tells which.
    even = (copies.offset > 0) & (copies.offset % max(step_ticks, 1) == 0) & (step_ticks > 0)
    by_time = carrier - np.where(even, copies.offset // max(step_ticks, 1), copies.back)
    by_place = carrier - copies.back
    fits = known.lack(segment, by_time, ticks)
    number = np.where(fits, by_time, by_place)
    chosen = np.flatnonzero((fits | known.lack(segment, by_place, ticks)) & ~numbering.duplicate[copies.row])
    first = np.unique(np.stack([segment[chosen], number[chosen]]), axis=1, return_index=True)[1]
    kept = chosen[np.sort(first)]
    return copies.those(kept), number[kept]


class _Received:
    """The distinct packets of a group in order of segment and number, and what is missing between them."""

    def __init__(self, numbering: Numbering, span: slice, step_ticks: int) -> None:
        rows = span.start + np.flatnonzero(~numbering.duplicate[span] & (numbering.segment[span] >= 0))
        rows = rows[np.lexsort((numbering.extended[rows], numbering.segment[rows]))]
        self._segment, self._number = numbering.segment[rows], numbering.extended[rows]
        self._ticks = numbering.media_ticks[rows]
        self._key = _keys(self._segment, self._number)
        self._step = step_ticks

    def lack(
        self, segment: NDArray[np.int32], number: NDArray[np.int64], ticks: NDArray[np.int64]
    ) -> NDArray[np.bool_]:
        """Which numbers are missing within their segment, at a media time that fits between those on both sides."""
        after = np.minimum(np.searchsorted(self._key, _keys(segment, number)), len(self._key) - 1)
        before = np.maximum(after - 1, 0)
        inside = (self._segment[before] == segment) & (self._segment[after] == segment)
        gap = (self._number[before] < number) & (number < self._number[after])
        between = (self._ticks[before] <= ticks) & (ticks <= self._ticks[after])
        # Where packets keep their pace over the gap, the media time is that of the number and no other.
        paced = self._ticks[after] - self._ticks[before] == (self._number[after] - self._number[before]) * self._step
        exact = ticks - self._ticks[before] == (number - self._number[before]) * self._step
        return np.asarray(inside & gap & between & (exact | ~paced))


def _keys(segment: NDArray[np.int32], number: NDArray[np.int64]) -> NDArray[np.int64]:
    """One number for each segment and extended sequence number, in their order; numbers may lie a little below 0."""
    return segment.astype(np.int64) << 42 | (number + (1 << 20)) & ((1 << 42) - 1)


def as_packets(
    copies: Copies,
    number: NDArray[np.int64],
    rows: RtpRows,
    numbering: Numbering,
    first: int,
    content: NDArray[np.uint8],
) -> StreamPackets:
    """Copies as packets of a stream whose first row is ``first``: under their own numbers and times, but as they came.

    ``content`` is that of each payload type.
    """
    of = copies.row
    return StreamPackets(
        time_ns=rows.time_ns[of],
        frame=rows.frame[of],
        buffer=rows.buffer[of],
        start=copies.start,
        length=copies.length,
        captured=copies.captured,
        sequence=number.astype(np.uint16),
        timestamp=rows.timestamp[of] - copies.offset.astype(np.uint32),
        payload_type=copies.payload_type,
        # RFC 2198, 4: the marker is not preserved.
        marker=np.zeros(len(copies), np.bool_),
        dscp=rows.dscp[of],
        ttl=rows.ttl[of],
        ip_id=rows.ip_id[of],
        vlan=rows.vlan[of],
        interface=rows.interface[of],
        extended=number,
        segment=numbering.segment[of] - numbering.segment[first],
        duplicate=np.zeros(len(copies), np.bool_),
        media_ticks=numbering.media_ticks[of] - copies.offset - numbering.media_ticks[first],
        content=content[copies.payload_type],
    )
