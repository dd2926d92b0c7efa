"""The RTP clock of a stream that nothing else tells, from its timestamps against its arrivals."""

import numpy as np
from numpy.typing import ArrayLike

from rtpaudit.metrics.arrays import column
from rtpaudit.serial import unwrap
from rtpaudit.units import NS_PER_S

CLOCK_RATES_HZ = (8000, 16000, 32000, 44100, 48000, 90000)

LAG_PACKETS = 100
"""Packets between two that are compared: 2 s of 20 ms packets, so that delay variation matters little."""

TOLERANCE = 0.05
"""Farthest that a measured rate may be from the named one, relative."""

TOLERANCE_AT_USUAL_PACKET_TIME = 0.2
"""The same where the commonest timestamp step is a usual packet time at that rate, for short streams with jitter."""

UNUSUAL = 0.1
"""Handicap of a rate at which the commonest step is no usual packet time; 44.1 and 48 kHz differ by 0.085."""

LONGEST_PACKET_S = 0.2
"""Usual are 2.5 and 5 ms (RFC 7587), and multiples of 10 ms (common practice) up to 200 ms (RFC 3551, 4.2)."""


def infer_clock_rate(time_ns: ArrayLike, timestamps: ArrayLike) -> int:
    """Clock rate that explains the timestamps of one payload type, snapped to a rate that is in use.

    Parameters
    ----------
    time_ns : int64 array, shape (n,)
        Arrival, in order of arrival; ten packets are enough. [ns]
    timestamps : uint32 array as on the wire, or unwrapped int64, shape (n,)
        Without telephone events, whose timestamps stand still. [ticks]

    Returns
    -------
    int
        8000, 16000, 32000, 44100, 48000 or 90000; 0 where none of them fits. [Hz]

    Notes
    -----
    The rate is the median of slopes between packets some way apart: loss, reordering, and pauses with suppressed
    silence leave it alone, and so do a few steps of either clock. A rate fits within 5 %, or within 20 % where the
    commonest step between packets is a usual packet time at that rate; that also tells 44.1 from 48 kHz where jitter
    leaves room for both.
    """
    time = column(time_ns, np.int64)
    wire = np.asarray(timestamps)
    ticks = unwrap(wire, 32) if wire.dtype == np.uint32 else column(wire, np.int64, len(time))
    if len(ticks) != len(time):
        raise ValueError(f"columns of one stream have one length, not {len(time)} and {len(ticks)}")
    measured = _median_rate(time, ticks)
    if not measured > 0:
        return 0
    step = _commonest_step(ticks)
    distance, rate = min((abs(np.log(measured / rate)) + _handicap(step, rate), rate) for rate in CLOCK_RATES_HZ)
    handicap = _handicap(step, rate)
    allowed = TOLERANCE if handicap else TOLERANCE_AT_USUAL_PACKET_TIME
    return rate if distance - handicap <= np.log1p(allowed) else 0


def _median_rate(time: np.ndarray, ticks: np.ndarray) -> float:
    """Median slope of timestamps over arrivals. [Hz] NaN where there is none."""
    lag = min(LAG_PACKETS, 2 * len(time) // 3)
    if lag == 0:
        return float("nan")
    elapsed = time[lag:] - time[:-lag]
    moved = ticks[lag:] - ticks[:-lag]
    sound = elapsed > 0
    return float(np.median(moved[sound] / elapsed[sound])) * NS_PER_S if sound.any() else float("nan")


def _commonest_step(ticks: np.ndarray) -> int:
    """Commonest rise from packet to packet. [ticks] 0 where there is none."""
    steps = np.diff(ticks)
    values, counts = np.unique(steps[steps > 0], return_counts=True)
    return int(values[counts.argmax()]) if len(values) else 0


def _handicap(step: int, rate: int) -> float:
    """0 where so many ticks are a usual packet time at that rate."""
    whole = step > 0 and step * 100 % rate == 0 and step <= rate * LONGEST_PACKET_S
    return 0.0 if whole or step * 200 == rate or step * 400 == rate else UNUSUAL
