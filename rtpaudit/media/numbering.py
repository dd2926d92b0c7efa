"""Extended sequence numbers: wraps, copies, late packets, restarts and outages told apart.

The rules are those of RFC 3550, A.1, with what a recording knows and a receiver does not: whether a packet came before
in the very same form, and whether timestamp and arrival tell of one and the same silence.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel
from rtpaudit.media.rtp import Groups

MAX_DROPOUT = 3000
"""RFC 3550, A.1: this far ahead of the highest number, the source may have started again."""
MAX_MISORDER = 100
"""RFC 3550, A.1: this far behind likewise."""
NEW_STREAM_AFTER_NS = 60_000_000_000
"""A restart after so long a silence is a stream of its own."""


@dataclass(frozen=True, slots=True)
class Numbering:
    """Columns beside the rows of ``Groups``. Shape (n,)."""

    extended: NDArray[np.int64]
    segment: NDArray[np.int32]
    """within the stream; -1 for a stray packet that belongs to no run of numbers"""
    duplicate: NDArray[np.bool_]
    stream: NDArray[np.int32]
    """within the group: one more where a restart after a long silence begins a new stream"""
    media_ticks: NDArray[np.int64]
    """unwrapped timestamp, 0 at the first row of the group"""


def number(groups: Groups, clock_rate_hz: NDArray[np.float64], packet_ticks: NDArray[np.int64]) -> Numbering:
    """Number the packets of every group.

    Parameters
    ----------
    groups : Groups
        Rows in order of arrival.
    clock_rate_hz : float array, shape (groups,)
        Clock rate of each group's media, 0 where unknown: no outage is recognised then. [Hz]
    packet_ticks : int array, shape (groups,)
        Timestamp step of most packets. [ticks]

    References
    ----------
    RFC 3550, A.1 (MAX_DROPOUT, MAX_MISORDER, confirmation by the next packet); RFC 4737, 3 (late packets).
    """
    rows = groups.rows
    columns = _number(
        rows.sequence,
        rows.timestamp,
        rows.fingerprint,
        rows.time_ns,
        groups.bounds,
        clock_rate_hz,
        packet_ticks,
    )
    return Numbering(*columns)


@kernel
def _signed(timestamp: Any, reference: Any) -> Any:
    """How far a timestamp lies ahead of another, by the shorter way round."""
    return (np.int64(timestamp) - np.int64(reference) + 0x80000000) % 0x100000000 - 0x80000000


@kernel
def _outage(ahead: Any, moved: Any, passed: Any, step: Any, rate: Any) -> Any:
    """Packets that an outage swallowed plus one, 0 where it was none: timestamp and arrival tell of the same silence.

    ``moved`` and ``passed`` are media time and arrival time since the newest packet, both in ticks.
    """
    if step <= 0 or passed < 0.5 * MAX_DROPOUT * step or abs(moved - passed) > 0.02 * passed + 0.5 * rate:
        return 0
    # The number may have wrapped in the dark; the timestamp tells how often. Fewer packets than the time could hold are
    # silence suppression; many more cannot be.
    turns: Any = max(np.int64(np.floor((moved / step - ahead) / 65536.0 + 0.5)), 0) if ahead >= MAX_DROPOUT else 0
    gone = ahead + 65536 * turns
    return gone if MAX_DROPOUT <= gone <= 2.0 * moved / step + 100.0 else 0


@kernel
def _number(
    sequence: NDArray[np.uint16],
    timestamp: NDArray[np.uint32],
    fingerprint: NDArray[np.uint32],
    time_ns: NDArray[np.int64],
    bounds: NDArray[np.int64],
    clock_rate_hz: NDArray[np.float64],
    packet_ticks: NDArray[np.int64],
) -> tuple[NDArray[np.int64], NDArray[np.int32], NDArray[np.bool_], NDArray[np.int32], NDArray[np.int64]]:
    n = len(sequence)
    extended, ticks = np.zeros(n, np.int64), np.zeros(n, np.int64)
    segment, stream = np.full(n, -1, np.int32), np.zeros(n, np.int32)
    duplicate = np.zeros(n, np.bool_)
    # The last row that bore a number, and the row that a copy copies; rows of other groups are below `first`.
    row_of = np.full(65536, -1, np.int64)
    copy_of = np.full(n, -1, np.int64)
    for g in range(len(bounds) - 1):
        first, last = bounds[g], bounds[g + 1]
        if first == last:
            continue
        rate, step = clock_rate_hz[g], packet_ticks[g]
        highest: Any = np.int64(sequence[first])
        top: Any = np.int64(first)
        lowest: Any = highest
        current, part = 0, 0
        # A packet that jumped and waits for the next one to confirm it, and its place if it is merely very late.
        pending: Any = np.int64(-1)
        late_number: Any = np.int64(0)
        may_be_late: Any = False
        for i in range(first, last):
            found = row_of[sequence[i]]
            moved = _signed(timestamp[i], timestamp[top])
            ticks[i] = ticks[top] + moved
            stream[i] = part
            if found >= first and timestamp[found] == timestamp[i] and fingerprint[found] == fingerprint[i]:
                duplicate[i] = True
                copy_of[i] = found
                continue
            row_of[sequence[i]] = i
            ahead: Any = (np.int64(sequence[i]) - highest) & 0xFFFF
            if i == first:
                extended[i], segment[i] = highest, 0
                continue
            gone = _outage(ahead, moved, (time_ns[i] - time_ns[top]) * 1e-9 * rate, step, rate)
            if gone == 0 and 1 <= ahead < MAX_DROPOUT:
                gone = ahead
            if (
                gone == 0
                and pending >= 0
                and 1 <= ((np.int64(sequence[i]) - np.int64(sequence[pending])) & 0xFFFF) < 100
            ):
                if time_ns[pending] - time_ns[top] >= NEW_STREAM_AFTER_NS:
                    part += 1
                current += 1
                lowest = np.int64(sequence[pending])
                highest = lowest + ((np.int64(sequence[i]) - lowest) & 0xFFFF)
                extended[pending], extended[i] = lowest, highest
                ticks[i] = ticks[pending] + _signed(timestamp[i], timestamp[pending])
                for k in (pending, np.int64(i)):
                    segment[k], stream[k] = current, part
                top, pending = np.int64(i), np.int64(-1)
                continue
            if pending >= 0 and may_be_late:
                extended[pending], segment[pending] = late_number, current
            pending = np.int64(-1)
            behind = 65536 - ahead
            earlier = highest - (behind & 0xFFFF)
            held = found >= first and segment[found] == current and extended[found] == earlier
            if gone > 0:
                highest += gone
                extended[i], segment[i] = highest, current
                top = np.int64(i)
            elif ahead == 0 or behind < MAX_MISORDER:
                extended[i], segment[i], duplicate[i] = earlier, current, held
                lowest = min(lowest, earlier)
            else:
                pending, late_number = np.int64(i), earlier
                may_be_late = earlier >= lowest and not held and -moved >= 0.5 * behind * step and step > 0
        if pending >= 0 and may_be_late:
            extended[pending], segment[pending] = late_number, current
    for i in range(n):
        if copy_of[i] >= 0:
            source = copy_of[i]
            extended[i], segment[i], stream[i], ticks[i] = (
                extended[source],
                segment[source],
                stream[source],
                ticks[source],
            )
    return extended, segment, duplicate, stream, ticks
