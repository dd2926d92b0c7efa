"""Buffers that follow the network: the offset of each talkspurt out of the transits that came before.

Both keep the offset between ``minimum`` and ``maximum`` above the least transit so far, and begin with ``nominal``
above the first. A packet counts from its arrival on, the first of the talkspurt included.
"""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel
from rtpaudit.units import NS_PER_MS

Nanoseconds = NDArray[np.int64]
Talkspurts = NDArray[np.int32]

GAIN = 0.125
"""of the newest packet in mean and deviation"""
DEVIATIONS = 4
"""deviations above the mean at which playout is set"""
SPIKE_NS = 100 * NS_PER_MS
"""step from packet to packet, besides two deviations, that begins a spike: 800 ticks of 125 us in print"""
SPIKE_OVER_NS = 7_875_000
"""smoothed slope below which a spike is over: 63 ticks of 125 us in print"""

HISTORY_PACKETS = 10_000
BIN_NS = NS_PER_MS
BINS = 8192
FLOOR_NS = 2048 * BIN_NS
"""by how much a transit may lie below the first one and still have a bin of its own"""
HEAD = 4
"""a delay of so many times the playout delay begins a spike"""
TAIL = 2
"""a delay below so many times the playout delay before the spike ends it"""


def by_mean_and_deviation(
    transit: Nanoseconds, talkspurt: Talkspurts, first: NDArray[np.int64], nominal: int, minimum: int, maximum: int
) -> Nanoseconds:
    """Offset of each talkspurt by running mean and deviation, following spikes at once.

    Parameters
    ----------
    transit : int64 array, shape (n,)
        Arrival minus media time in order of arrival. [ns]
    talkspurt : int32 array, shape (n,)
    first : int64 array, shape (talkspurts,)
        Row of the packet of each talkspurt that arrives first.
    nominal, minimum, maximum : int
        Delays of the buffer. [ns]

    Returns
    -------
    int64 array, shape (talkspurts,)
        Playout time minus media time. [ns]

    References
    ----------
    Ramjee, Kurose, Towsley, Schulzrinne, "Adaptive playout mechanisms for packetized audio applications in wide-area
    networks", INFOCOM 1994, algorithm 4 with its constants; from memory.
    """
    offset = np.empty(len(first), np.int64)
    _mean_and_deviation(transit, talkspurt, first, nominal, minimum, maximum, offset)
    return offset


def by_percentile(
    transit: Nanoseconds,
    talkspurt: Talkspurts,
    first: NDArray[np.int64],
    nominal: int,
    minimum: int,
    maximum: int,
    share: float,
) -> Nanoseconds:
    """Offset of each talkspurt by percentile of the latest delays, following spikes at once.

    Parameters
    ----------
    transit, talkspurt, first, nominal, minimum, maximum
        As for ``by_mean_and_deviation``.
    share : float
        Share of packets that should be in time. [0 to 1]

    Returns
    -------
    int64 array, shape (talkspurts,)
        Playout time minus media time. [ns]

    Notes
    -----
    Transits are counted in bins of 1 ms from 2 s below the first one to 6 s above, and the percentile is the upper edge
    of its bin. Packets within a spike do not enter the history; a talkspurt that begins in one waits for the delay of
    its first packet.

    References
    ----------
    Moon, Kurose, Towsley, "Packet audio playout delay adjustment: performance bounds and algorithms", Multimedia
    Systems 6 (1998), the algorithm with its constants; from memory.
    """
    offset = np.empty(len(first), np.int64)
    _percentile(transit, talkspurt, first, nominal, minimum, maximum, share, offset)
    return offset


@kernel
def _mean_and_deviation(
    transit: Nanoseconds,
    talkspurt: Talkspurts,
    first: NDArray[np.int64],
    nominal: int,
    minimum: int,
    maximum: int,
    offset: Nanoseconds,
) -> None:
    if len(transit) == 0:
        return
    least = transit[0]
    mean, deviation, slope = float(transit[0]), nominal / DEVIATIONS, 0.0
    before, last = float(transit[0]), float(transit[0])
    spike = False
    for i in range(len(transit)):
        now = float(transit[i])
        least = min(least, transit[i])
        settled = False
        if not spike and abs(now - last) > 2 * deviation + SPIKE_NS:
            spike, slope = True, 0.0
        elif spike:
            slope = slope / 2 + abs(2 * now - last - before) / 8
            settled = slope <= SPIKE_OVER_NS
            spike = not settled
        if i > 0 and not settled:
            mean = mean + now - last if spike else GAIN * now + (1 - GAIN) * mean
            deviation = GAIN * abs(now - mean) + (1 - GAIN) * deviation
        before, last = last, now
        if first[talkspurt[i]] == i:
            wanted = np.int64(np.rint(mean + DEVIATIONS * deviation))
            offset[talkspurt[i]] = least + min(max(wanted - least, minimum), maximum)


@kernel
def _percentile(
    transit: Nanoseconds,
    talkspurt: Talkspurts,
    first: NDArray[np.int64],
    nominal: int,
    minimum: int,
    maximum: int,
    share: float,
    offset: Nanoseconds,
) -> None:
    if len(transit) == 0:
        return
    counts = np.zeros(BINS, np.int64)
    history = np.zeros(HISTORY_PACKETS, np.int64)
    held, least, floor = 0, transit[0], transit[0] - FLOOR_NS
    current, before_spike, spike = nominal, nominal, False
    for i in range(len(transit)):
        least = min(least, transit[i])
        delay = transit[i] - least
        if spike:
            spike = delay > TAIL * before_spike
        elif delay > HEAD * current:
            spike, before_spike = True, current
        if not spike:
            slot = min(max((transit[i] - floor) // BIN_NS, 0), BINS - 1)
            if held >= HISTORY_PACKETS:
                counts[history[held % HISTORY_PACKETS]] -= 1
            history[held % HISTORY_PACKETS] = slot
            counts[slot] += 1
            held += 1
        if first[talkspurt[i]] == i:
            wanted = delay
            if i == 0:
                wanted = np.int64(nominal)
            elif not spike:
                needed = np.ceil(share * min(held, HISTORY_PACKETS))
                slot, below = 0, counts[0]
                while below < needed:
                    slot += 1
                    below += counts[slot]
                wanted = floor + (slot + 1) * BIN_NS - least
            current = min(max(wanted, minimum), maximum)
            offset[talkspurt[i]] = least + current
