"""Payloads of one stream laid on its RTP timeline: each sample at its media time, silence where nothing came.

Position 0 is the first sample of the packet that is first in media time. Where arrival times contradict the timestamps
by seconds, arrival decides, so that a timestamp run wild cannot ask for hours of silence.
"""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel
from rtpaudit.units import NS_PER_S

Octets = NDArray[np.uint8]
Samples = NDArray[np.int16]
Positions = NDArray[np.int64]

JUMP_S = 3.0
"""disagreement of arrival and timestamp from one packet to the next that is no network's doing (common practice)"""
CREEP_S = 10.0
"""disagreement that may add up over many packets, and on top of it"""
CREEP_SHARE = 0.05
"""of the time passed: a clock further off than this is not the clock of the media"""
STEADY_S = 0.2
"""disagreement up to which a new segment goes on in the time of the one before"""
SET_S = 3600.0
"""between two packets of one run of numbers, though timestamps say otherwise: the capture's clock was set"""
RECOVERY_PACKETS = 500
"""packets within which a network that held packets back has delivered them"""


def gather(octets: Octets, start: NDArray[np.int64], length: NDArray[np.int32]) -> tuple[Octets, Positions]:
    """Payloads of many packets, one after the other.

    Parameters
    ----------
    octets : uint8 array, shape (octets,)
        The buffer that the payloads lie in.
    start : int64 array, shape (n,)
        First octet of each payload.
    length : int32 array, shape (n,)
        Octets of each payload that were captured. A payload that would leave the buffer is cut short.

    Returns
    -------
    payloads : uint8 array, shape (sum of lengths,)
    offsets : int64 array, shape (n + 1,)
        Payload ``i`` is ``payloads[offsets[i]:offsets[i + 1]]``.
    """
    start, held = _held(octets, start, length)
    offsets = np.concatenate([np.zeros(1, np.int64), np.cumsum(held)])
    payloads = np.empty(int(offsets[-1]), np.uint8)
    _gather(octets, start, offsets, payloads)
    return payloads, offsets


def lay(samples: Samples, offsets: Positions, position: Positions, total: int, onto: Samples | None = None) -> Samples:
    """Samples of each packet at their place on the timeline, silence elsewhere.

    Parameters
    ----------
    samples : int16 array, shape (samples,)
    offsets : int64 array, shape (n + 1,)
        Packet ``i`` is ``samples[offsets[i]:offsets[i + 1]]``.
    position : int64 array, shape (n,)
        First sample of each packet on the timeline. What would lie outside it is left out.
    total : int
        Length of the timeline. [samples]
    onto : int16 array, shape (total,), optional
        The timeline to go on with. It is written to.

    Returns
    -------
    int16 array, shape (total,)
        Where packets overlap the later in the arguments stays.
    """
    timeline = np.zeros(total, np.int16) if onto is None else onto
    _lay(np.ascontiguousarray(samples), offsets, position, timeline)
    return timeline


def lay_by_table(
    table: Samples,
    octets: Octets,
    start: NDArray[np.int64],
    length: NDArray[np.int32],
    position: Positions,
    total: int,
    onto: Samples | None = None,
) -> Samples:
    """``gather``, decoding and ``lay`` in one pass, for a code that has one octet a sample.

    Parameters
    ----------
    table : int16 array, shape (256,)
        Sample value of each octet.
    octets, start, length
        As for ``gather``.
    position, total
        As for ``lay``.
    onto : int16 array, shape (total,), optional
        The timeline to go on with, for a stream whose payloads lie in several buffers. It is written to.

    Returns
    -------
    int16 array, shape (total,)
    """
    timeline = np.zeros(total, np.int16) if onto is None else onto
    start, held = _held(octets, start, length)
    _lay_by_table(table, octets, start, held, position, timeline)
    return timeline


def positions(
    media_ticks: NDArray[np.int64],
    time_ns: NDArray[np.int64],
    clock_rate_hz: int,
    sampling_rate_hz: int,
    segment: NDArray[np.int32],
) -> Positions:
    """Place of each packet on the RTP timeline. [samples]

    Parameters
    ----------
    media_ticks : int64 array, shape (n,)
        Unwrapped RTP timestamps in order of arrival. [ticks of ``clock_rate_hz``]
    time_ns : int64 array, shape (n,)
        Arrival times. [ns]
    clock_rate_hz, sampling_rate_hz : int
        Clock of the timestamps, and of the samples. [Hz]
    segment : int32 array, shape (n,)
        0, and one more for every restart of the source.

    Returns
    -------
    int64 array, shape (n,)
        0 for the packet that is first in media time. The largest is at most what the arrivals span, and
        ``CREEP_SHARE`` and ``CREEP_S`` on top of it.

    Notes
    -----
    A loss and a pause leave their exact length, whatever the arrival times say. A packet begins a new piece of
    timeline, laid at its arrival time relative to the first packet, where the disagreement of timestamp and arrival
    changes by more than ``JUMP_S`` from the packet before, unless the packets that follow take it back (then they had
    been held up on the way); where it adds up to more than ``CREEP_S`` and ``CREEP_SHARE``; and where a new segment
    does not simply go on in time. It does not begin before the packet before it ends, and begins right there where the
    capture's clock was set back, or on by more than ``SET_S``. A lone packet with a stray timestamp or arrival does not
    move those that follow.
    """
    if len(media_ticks) == 0:
        return np.empty(0, np.int64)
    time_ns = _without_stray_times(media_ticks, time_ns, clock_rate_hz)
    steps = np.diff(media_ticks)
    forward = steps[steps > 0]
    usual = int(np.median(forward)) * sampling_rate_hz // clock_rate_hz if len(forward) else 0
    places = np.empty(len(media_ticks), np.int64)
    _positions(media_ticks, time_ns, segment, clock_rate_hz, sampling_rate_hz, usual, places)
    places -= places.min()
    return places


def _without_stray_times(ticks: Positions, time_ns: Positions, clock_hz: int) -> Positions:
    """Arrivals, those of lone packets put right that lie apart from both neighbours though their timestamps do not."""
    if len(ticks) < 3:
        return time_ns
    most = JUMP_S * NS_PER_S
    step = np.diff(ticks) * (NS_PER_S / clock_hz)
    apart = np.abs(step - np.diff(time_ns)) > most
    if not apart.any():
        return time_ns
    over_two = np.abs(step[1:] + step[:-1] - (time_ns[2:] - time_ns[:-2])) > most
    stray = np.flatnonzero(apart[1:] & apart[:-1] & ~over_two & (np.abs(step[:-1]) <= most)) + 1
    put_right = time_ns.copy()
    put_right[stray] = time_ns[stray - 1] + step[stray - 1].astype(np.int64)
    if apart[0] and not apart[1] and abs(step[0]) <= most:
        put_right[0] = time_ns[1] - int(step[0])
    if apart[-1] and not apart[-2] and abs(step[-1]) <= most:
        put_right[-1] = time_ns[-2] + int(step[-1])
    return put_right


def span(position: Positions, length: NDArray[np.int64]) -> int:
    """Length of the timeline that holds packets of ``length`` samples at ``position``. [samples]"""
    return int((position + length).max()) if len(position) else 0


def _held(
    octets: Octets, start: NDArray[np.int64], length: NDArray[np.int32]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Start and length of each payload as far as it lies within the buffer."""
    first = np.clip(start, 0, len(octets))
    return first, np.clip(length.astype(np.int64), 0, len(octets) - first)


@kernel
def _gather(octets: Octets, start: Positions, offsets: Positions, payloads: Octets) -> None:
    for i in range(len(start)):
        for j in range(offsets[i + 1] - offsets[i]):
            payloads[offsets[i] + j] = octets[start[i] + j]


@kernel
def _lay(samples: Samples, offsets: Positions, position: Positions, timeline: Samples) -> None:
    for i in range(len(position)):
        first = max(0, -position[i])
        last = min(offsets[i + 1] - offsets[i], len(timeline) - position[i])
        for j in range(first, last):
            timeline[position[i] + j] = samples[offsets[i] + j]


@kernel
def _lay_by_table(
    table: Samples, octets: Octets, start: Positions, held: Positions, position: Positions, timeline: Samples
) -> None:
    for i in range(len(position)):
        first = max(0, -position[i])
        last = min(held[i], len(timeline) - position[i])
        for j in range(first, last):
            timeline[position[i] + j] = table[octets[start[i] + j]]


@kernel
def _positions(
    ticks: Positions,
    time_ns: Positions,
    segment: NDArray[np.int32],
    clock_hz: int,
    sampling_hz: int,
    step: int,
    places: Positions,
) -> None:
    """Each packet's place: in the current piece of timeline, back in the piece before it, or in a new one.

    A lead is by how many seconds media time runs ahead of arrival. A piece is the row (ticks of its first packet,
    that packet's place), and the pair (lead of its first packet, of its latest).
    """
    piece, old = (ticks[0], 0), (ticks[0], 0)
    leads, old_leads = (0.0, 0.0), (np.inf, np.inf)
    end = 0
    for i in range(len(ticks)):
        elapsed = (time_ns[i] - time_ns[0]) / NS_PER_S
        lead = (ticks[i] - ticks[0]) / clock_hz - elapsed
        creep = CREEP_S + CREEP_SHARE * abs(elapsed)
        restart = i > 0 and segment[i] != segment[i - 1]
        held_up = False
        if abs(lead - leads[1]) > (STEADY_S if restart else JUMP_S) or abs(lead - leads[0]) > creep:
            if not restart and abs(lead - old_leads[1]) <= JUMP_S and abs(lead - old_leads[0]) <= creep:
                piece, old = old, piece
                leads, old_leads = old_leads, leads
            else:
                if not restart and lead < leads[1] and ticks[i] - piece[0] >= -JUMP_S * clock_hz:
                    for k in range(i + 1, min(i + 1 + RECOVERY_PACKETS, len(ticks))):
                        later = (ticks[k] - ticks[0]) / clock_hz - (time_ns[k] - time_ns[0]) / NS_PER_S
                        if abs(later - leads[1]) <= JUMP_S:
                            held_up = True
                            break
                if not held_up:
                    place = int(np.floor(elapsed * sampling_hz + 0.5))
                    since = (time_ns[i] - time_ns[i - 1]) / NS_PER_S
                    if since > SET_S or (place < end and (since < -JUMP_S or end <= place + STEADY_S * sampling_hz)):
                        place = end
                    old, old_leads = piece, leads
                    piece, leads = (ticks[i], place), (lead, lead)
        if not held_up:
            leads = (leads[0], lead)
        places[i] = piece[1] + (2 * (ticks[i] - piece[0]) * sampling_hz + clock_hz) // (2 * clock_hz)
        end = places[i] + step
