"""When each run of missing packets began and how much media it took."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.kernels import kernel
from rtpaudit.metrics.arrays import column
from rtpaudit.metrics.loss import MissingRuns, Sequence
from rtpaudit.units import MS_PER_S, NS_PER_MS, NS_PER_S

LONGEST_PACKET_MS = 200
"""A receiver should accept packets of 0 to 200 ms of audio (RFC 3551, 4.2); longer steps are pauses."""

LOOK_BACK = 64
"""Packets before a run that are asked for the packet time of the moment."""

SLACK_NS = 2 * NS_PER_S
"""What missing packets may be due behind the packet that arrived after them; only forged timestamps reach it."""

LONGEST_NS = float(1 << 60)


@dataclass(frozen=True, slots=True)
class Gaps:
    """Runs of missing packets in order of the stream. Shape (gaps,)."""

    first_missing: NDArray[np.int64]
    """extended sequence number"""
    packets_missing: NDArray[np.int64]
    at_ns: NDArray[np.int64]
    """arrival of the packet before it in sequence"""
    duration_ms: NDArray[np.float64]
    after_s: NDArray[np.float64]


def date_gaps(
    runs: MissingRuns,
    sequence: Sequence,
    time_ns: ArrayLike,
    media_ticks: ArrayLike,
    audio: ArrayLike,
    clock_rate_hz: ArrayLike,
    packet_time_ms: float,
    started_ns: int | None = None,
) -> Gaps:
    """Begin and media time of each run of missing packets.

    Parameters
    ----------
    runs, sequence
        Of the same stream.
    time_ns : int64 array, shape (n,)
        Arrival. [ns]
    media_ticks : int64 array, shape (n,)
        [ticks]
    audio : bool array, shape (n,)
        Neither telephone event nor comfort noise.
    clock_rate_hz : int32 array, shape (n,), or one number
        0 where it is unknown. [Hz]
    packet_time_ms : float
        Of most packets; NaN or 0 where it is unknown. [ms]
    started_ns : int, optional
        First arrival; by default of the first packet. [ns]

    Returns
    -------
    Gaps
        ``duration_ms`` is the timestamp after the run minus the one before it, minus the duration of the packet before.

    Notes
    -----
    The duration of a packet is the step between neighbours that was last seen twice running, so that a change of packet
    time in mid-stream is followed; else ``packet_time_ms``. Where the timestamps say something else than so many
    packets of that duration, by more than one packet, a pause, an event or a fault of the timestamps lies between, and
    the number of packets times their duration stands instead. NaN where neither clock rate nor packet time is known.
    """
    time = column(time_ns, np.int64)
    n, count = len(time), len(runs.packets)
    began = int(time[0]) if started_ns is None and n else int(started_ns or 0)
    at = time[runs.before]
    duration = np.empty(count)
    if count:
        usual_ms = packet_time_ms if packet_time_ms > 0 else 0.0
        _durations(
            runs.position,
            sequence.order,
            sequence.place,
            column(media_ticks, np.int64, n),
            column(audio, np.bool_, n),
            column(clock_rate_hz, np.int32, n),
            usual_ms,
            duration,
        )
    return Gaps(runs.first_missing, runs.packets, at, duration, (at - began) / NS_PER_S)


def spacing_ns(gaps: Gaps, runs: MissingRuns, time_ns: ArrayLike) -> NDArray[np.int64]:
    """Time from one missing packet of a run to the next; where it is unknown they lie evenly between their neighbours.

    Returns
    -------
    int64 array, shape (gaps,)
        Never negative, and never so long that the run ends far behind the arrival of the packet after it. [ns]
    """
    time = column(time_ns, np.int64)
    parted = np.maximum(time[runs.after] - time[runs.before], 0)
    by_media = gaps.duration_ms * NS_PER_MS / gaps.packets_missing
    chosen = np.where(np.isnan(by_media), parted / (gaps.packets_missing + 1), by_media)
    longest = (parted.astype(np.float64) + SLACK_NS) / gaps.packets_missing
    return np.asarray(np.rint(np.clip(chosen, 0.0, np.minimum(longest, LONGEST_NS))), np.int64)


@kernel
def _durations(
    position: NDArray[np.int64],
    order: NDArray[np.int64],
    place: NDArray[np.int64],
    media_ticks: NDArray[np.int64],
    audio: NDArray[np.bool_],
    clock_rate_hz: NDArray[np.int32],
    usual_ms: float,
    duration_ms: NDArray[np.float64],
) -> None:
    """Media time missing in each run; see ``date_gaps``."""
    for run in range(len(position)):
        k = position[run]
        before, after = order[k], order[k + 1]
        rate = clock_rate_hz[before]
        missing = place[k + 1] - place[k] - 1
        if rate <= 0:
            duration_ms[run] = missing * usual_ms if usual_ms > 0 else np.nan
            continue
        packet = usual_ms * rate / MS_PER_S
        seen = 0
        for j in range(k, max(k - LOOK_BACK, 0), -1):
            now, then = order[j], order[j - 1]
            if not (audio[now] and audio[then]) or place[j] - place[j - 1] != 1 or clock_rate_hz[then] != rate:
                continue
            step = media_ticks[now] - media_ticks[then]
            if step == seen:
                packet = step
                break
            if 0 < step <= rate * LONGEST_PACKET_MS / MS_PER_S:
                seen = step
        distance = media_ticks[after] - media_ticks[before]
        ticks = missing * packet
        if clock_rate_hz[after] == rate:
            if packet == 0:
                ticks = distance * missing / (missing + 1) if distance > 0 else np.nan
            elif abs(distance - (missing + 1) * packet) <= packet:
                ticks = distance - packet
        elif packet == 0:
            ticks = np.nan
        duration_ms[run] = ticks * MS_PER_S / rate
