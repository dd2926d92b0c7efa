"""Tells RTP from all else that looks like it: headers that agree with each other over several packets.

One header proves nothing (a quarter of random octets have version 2), so a group of packets with one flow and one SSRC
is put on probation (RFC 3550, A.1): its numbers have to go on by small steps and its timestamps have to move with them.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel
from rtpaudit.media.rtp import Groups

LEAST_PACKETS = 3
"""Two steps of one are RFC 3550's MIN_SEQUENTIAL twice over; with two packets alone, chance and habit fake it."""
SURE_PACKETS = 10
FORWARD_STEP = 100
BLOCK_PACKETS = 8
BLOCK_NS = 100_000_000
SLOWEST_HZ, FASTEST_HZ = 2_000, 400_000
"""Media clocks are of 8 to 90 kHz (RFC 3551). Beyond these lie counters of ticks, milliseconds and microseconds;
between them is room for timestamps that step wrong by a few times."""
FEWEST_BLOCKS = 4
_UNASSIGNED = np.zeros(128, np.bool_)
# RFC 3551, tables 4 and 5: never given out, or reserved so as not to be taken for RTCP.
_UNASSIGNED[[1, 2, 19, 20, 21, 22, 23, 24, 27, 29, 30]] = True
_UNASSIGNED[35:96] = True


@dataclass(frozen=True, slots=True)
class Survey:
    """Counts per group. Shape (groups,)."""

    packets: NDArray[np.int64]
    copies: NDArray[np.int64]
    """steps of 0"""
    sequential: NDArray[np.int64]
    """steps of exactly 1"""
    forward: NDArray[np.int64]
    """steps of 1 to FORWARD_STEP whose timestamp does not jump"""
    ticking: NDArray[np.int64]
    """forward steps whose timestamp moved"""
    payload_type: NDArray[np.int64]
    """of most packets"""
    agreeing: NDArray[np.int64]
    """packets of that payload type"""
    short: NDArray[np.int64]
    """packets of 4 octets or fewer of payload: events"""
    timed: NDArray[np.int64]
    """blocks of packets over some time whose timestamps moved"""
    paced: NDArray[np.int64]
    """of these, where they moved as fast as some media clock"""


def survey(groups: Groups) -> Survey:
    """Counts that decide whether each group is RTP."""
    rows = groups.rows
    counts = _survey(rows.sequence, rows.timestamp, rows.payload_type, rows.length, rows.time_ns, groups.bounds)
    return Survey(np.diff(groups.bounds), *counts)


def is_rtp(found: Survey) -> NDArray[np.bool_]:
    """Which groups pass probation.

    Small groups must be regular in almost every step; large ones may lose a third and more of their packets, arrive out
    of order or twice, but most of what is not a copy still goes forward, and timestamps move.
    """
    steps = found.packets - 1 - found.copies
    events = found.short * 2 > found.packets
    # The frames of video fill many packets of one timestamp; a timestamp that never moves is none.
    moving = (found.ticking * 256 >= found.forward) & (found.ticking > 0)
    few = (
        (found.packets >= LEAST_PACKETS)
        & (found.sequential >= 2)
        & (found.forward >= steps - 1 - steps // 8)
        & (found.agreeing * 3 >= found.packets * 2)
    )
    many = (found.packets >= SURE_PACKETS) & (found.forward * 2 >= steps) & (found.forward >= SURE_PACKETS // 2)
    # An unassigned payload type is worth a stream only where there is no other doubt.
    odd = _UNASSIGNED[found.payload_type] & ((found.packets < 2 * SURE_PACKETS) | (found.sequential * 2 < steps))
    # Payload types may change in mid-call, but not with every packet.
    settled = found.agreeing * 4 >= found.packets
    # A jump of the timestamp spoils one block, a delayed copy of all some; a clock that is no media clock every one.
    paced = (found.timed < FEWEST_BLOCKS) | (found.paced * 4 >= found.timed)
    return (few | many) & (moving & paced | events) & settled & ~odd


@kernel
def _survey(
    sequence: NDArray[np.uint16],
    timestamp: NDArray[np.uint32],
    payload_type: NDArray[np.uint8],
    length: NDArray[np.int32],
    time_ns: NDArray[np.int64],
    bounds: NDArray[np.int64],
) -> tuple[
    NDArray[np.int64],
    NDArray[np.int64],
    NDArray[np.int64],
    NDArray[np.int64],
    NDArray[np.int64],
    NDArray[np.int64],
    NDArray[np.int64],
    NDArray[np.int64],
    NDArray[np.int64],
]:
    groups = len(bounds) - 1
    copies, sequential = np.zeros(groups, np.int64), np.zeros(groups, np.int64)
    forward, ticking = np.zeros(groups, np.int64), np.zeros(groups, np.int64)
    common, agreeing = np.zeros(groups, np.int64), np.zeros(groups, np.int64)
    short, timed, paced = np.zeros(groups, np.int64), np.zeros(groups, np.int64), np.zeros(groups, np.int64)
    seen = np.zeros(128, np.int64)
    for g in range(groups):
        first, last = bounds[g], bounds[g + 1]
        seen[:] = 0
        block = first
        for i in range(first, last):
            seen[payload_type[i]] += 1
            if length[i] <= 4:
                short[g] += 1
            if i == first:
                continue
            step = (np.int64(sequence[i]) - np.int64(sequence[i - 1])) & 0xFFFF
            moved = (np.int64(timestamp[i]) - np.int64(timestamp[i - 1])) & 0xFFFFFFFF
            if step == 0:
                copies[g] += 1
            elif step <= 100 and moved < 1 << 29:
                forward[g] += 1
                ticking[g] += moved > 0
                sequential[g] += step == 1
            passed = time_ns[i] - time_ns[block]
            if i - block >= BLOCK_PACKETS and passed >= BLOCK_NS:
                moved = (np.int64(timestamp[i]) - np.int64(timestamp[block])) & 0xFFFFFFFF
                timed[g] += moved > 0
                paced[g] += moved > 0 and SLOWEST_HZ <= moved * 1e9 / passed <= FASTEST_HZ
                block = i
        common[g] = seen.argmax()
        agreeing[g] = seen[common[g]]
    return copies, sequential, forward, ticking, common, agreeing, short, timed, paced
