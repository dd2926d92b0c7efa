"""The receiver's playout buffer: from arrival times and RTP timestamps, which packets were in time to be played.

A transit is arrival time minus media time, so a delay with an unknown constant in it. An offset is what the buffer adds
to the media time of a talkspurt to get its playout time; a packet is late where its transit exceeds that. Talkspurts
are told apart by pauses in the media, and the offset changes only from one to the next.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.playout import adaptive
from rtpaudit.profile import Playout
from rtpaudit.units import NS_PER_MS, NS_PER_S

Nanoseconds = NDArray[np.int64]
Talkspurts = NDArray[np.int32]

FAR_NS = float(1 << 58)
"""nine years: beyond any stream, and sums of several still fit 64 bits"""


@dataclass(frozen=True, slots=True)
class Played:
    """What the buffer made of the packets of one stream, columns in order of arrival."""

    played: NDArray[np.bool_]
    """shape (n,): in time; a packet that is not was discarded as late"""
    playout_ns: Nanoseconds
    """shape (n,): when the first sample of the packet is due at the ear, on the clock of the arrivals"""
    talkspurt: Talkspurts
    """shape (n,): 0 for the first in the order of the media, and one more after each pause"""
    required_ns: Nanoseconds
    """shape (n,): delay that the first packet of the talkspurt needs in the buffer for this one to be in time"""
    talkspurt_delay_ms: NDArray[np.float64]
    """shape (talkspurts,): time that the first packet of each spends in the buffer"""
    mean_delay_ms: float
    """mean time that a played packet spends in the buffer; NaN where none is played"""


def play(
    time_ns: Nanoseconds,
    media_ticks: NDArray[np.int64],
    talkspurt: Talkspurts,
    clock_rate_hz: int,
    settings: Playout,
    skew_ppm: float = 0.0,
) -> Played:
    """The packets of one stream at the receiver's buffer.

    Parameters
    ----------
    time_ns : int64 array, shape (n,)
        Arrival times of the distinct audio packets. [ns]
    media_ticks : int64 array, shape (n,)
        Their unwrapped RTP timestamps. [ticks of ``clock_rate_hz``]
    talkspurt : int32 array, shape (n,)
        As ``talkspurts`` gives them.
    clock_rate_hz : int
        Clock of the timestamps. [Hz]
    settings : Playout
        Kind of buffer and its delays.
    skew_ppm : float
        Sender's media clock against the clock of the arrivals, positive where it is fast; NaN is taken as 0. [ppm]

    Returns
    -------
    Played

    Notes
    -----
    - ``fixed``: the packet of a talkspurt that arrives first waits for the nominal delay, and the rest follows it.
    - ``adaptive`` and ``percentile``: see ``rtpaudit.playout.adaptive``. Where speech goes on without a pause they
      adjust once a second, as receivers do by stretching and shrinking.
    - ``ideal``: knows all arrivals beforehand and waits just long enough that no packet of the talkspurt is late.

    A receiver follows the sender's clock, by resampling or by a sample more or less now and then; so the media time
    that arrivals are compared with runs at the sender's pace, and drift neither fills nor empties the buffer.

    References
    ----------
    Ramjee, Kurose, Towsley, Schulzrinne, INFOCOM 1994; Moon, Kurose, Towsley, Multimedia Systems 6 (1998). Both from
    memory.
    """
    if settings.kind in ("adaptive", "percentile"):
        talkspurt = _once_a_second(media_ticks, talkspurt, clock_rate_hz)
    passed = transit(time_ns, media_ticks, clock_rate_hz, skew_ppm)
    first = _first_arrivals(talkspurt)
    offset = _offsets(passed, talkspurt, first, settings)
    slack = offset[talkspurt] - passed
    played = slack >= 0
    return Played(
        played=played,
        playout_ns=time_ns + slack,
        talkspurt=talkspurt,
        required_ns=passed - passed[first][talkspurt],
        talkspurt_delay_ms=(offset - passed[first]) / NS_PER_MS,
        mean_delay_ms=float(slack[played].mean() / NS_PER_MS) if played.any() else float("nan"),
    )


def transit(
    time_ns: Nanoseconds, media_ticks: NDArray[np.int64], clock_rate_hz: int, skew_ppm: float = 0.0
) -> Nanoseconds:
    """Arrival time minus media time of each packet, 0 for the one that arrived first. [ns]

    Media time runs at the sender's pace: ``skew_ppm`` as for ``play``.
    """
    if len(time_ns) == 0:
        return np.empty(0, np.int64)
    pace = 1.0 + (0.0 if np.isnan(skew_ppm) else skew_ppm) * 1e-6
    media_ns = (media_ticks - media_ticks[0]) * (NS_PER_S / (clock_rate_hz * pace))
    passed = np.clip((time_ns - time_ns[0]) - media_ns, -FAR_NS, FAR_NS)
    return np.asarray(np.rint(passed), np.int64)


def talkspurts(
    sequence: NDArray[np.int64],
    segment: NDArray[np.int32],
    media_ticks: NDArray[np.int64],
    packet_ticks: NDArray[np.int64],
    pause_ticks: int,
    audio: NDArray[np.bool_] | None = None,
) -> Talkspurts:
    """Talkspurt of each audio packet: a new one begins after a pause in the media, and with each segment.

    Parameters
    ----------
    sequence, segment, media_ticks : integer arrays, shape (n,)
        Extended sequence numbers, segments and unwrapped timestamps of the distinct packets, in order of arrival.
    packet_ticks : int64 array, shape (n,)
        Media time that each packet carries. [ticks]
    pause_ticks : int
        Pause from which a new talkspurt begins. [ticks]
    audio : bool array, shape (n,), optional
        False for packets that take part in the numbering but carry no speech (comfort noise, telephone events).

    Returns
    -------
    int32 array, shape (audio packets,)
        In order of arrival.

    Notes
    -----
    Missing packets are taken to have been as long as the one before them: a loss is not a pause. A timestamp that goes
    back by as much as a pause begins a talkspurt as well.
    """
    # Most streams come in order, and sorting what is sorted costs more than asking.
    in_order = len(sequence) > 0 and bool((sequence[1:] > sequence[:-1]).all()) and segment[0] == segment[-1]
    order = np.arange(len(sequence)) if in_order else np.lexsort((sequence, segment))
    rank = np.arange(len(order)) if audio is None else np.flatnonzero(audio[order])
    spoken = order[rank]
    if len(spoken) == 0:
        return np.empty(0, np.int32)
    missing = np.maximum(np.diff(sequence[spoken]) - np.diff(rank), 0)
    gap = np.diff(media_ticks[spoken]) - packet_ticks[spoken][:-1] * (1 + missing)
    begins = (np.abs(gap) >= pause_ticks) | (np.diff(segment[spoken]) != 0)
    number = np.zeros(len(order), np.int32)
    number[spoken[1:]] = np.cumsum(begins)
    return number if audio is None else number[audio]


def _once_a_second(media_ticks: NDArray[np.int64], talkspurt: Talkspurts, clock_rate_hz: int) -> Talkspurts:
    """Talkspurts cut again wherever a second of speech has passed without a pause."""
    begin = np.full(int(talkspurt.max(initial=-1)) + 1, np.iinfo(np.int64).max)
    np.minimum.at(begin, talkspurt, media_ticks)
    second = (media_ticks - begin[talkspurt]) // clock_rate_hz
    order = np.lexsort((second, talkspurt))
    cut = np.zeros(len(order), np.int32)
    cut[order[1:]] = np.cumsum((np.diff(second[order]) != 0) | (np.diff(talkspurt[order]) != 0))
    return cut


def _first_arrivals(talkspurt: Talkspurts) -> NDArray[np.int64]:
    """Row of the packet of each talkspurt that arrives first."""
    first = np.zeros(int(talkspurt.max(initial=-1)) + 1, np.int64)
    first[talkspurt[::-1]] = np.arange(len(talkspurt))[::-1]
    return first


def _offsets(passed: Nanoseconds, talkspurt: Talkspurts, first: NDArray[np.int64], settings: Playout) -> Nanoseconds:
    """Playout time minus media time of each talkspurt. [ns]"""
    if settings.kind == "fixed":
        return passed[first] + round(settings.nominal_ms * NS_PER_MS)
    if settings.kind == "ideal":
        offset = passed[first]
        np.maximum.at(offset, talkspurt, passed)
        return offset
    nominal, minimum, maximum = (
        round(ms * NS_PER_MS) for ms in (settings.nominal_ms, settings.minimum_ms, settings.maximum_ms)
    )
    if settings.kind == "adaptive":
        return adaptive.by_mean_and_deviation(passed, talkspurt, first, nominal, minimum, maximum)
    in_time = 1.0 - settings.late_pct / 100.0
    return adaptive.by_percentile(passed, talkspurt, first, nominal, minimum, maximum, in_time)
