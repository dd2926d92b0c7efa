"""Lost packets whose copies came within others (RFC 2198): which of them came in time to be played."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.media.streams import Content, Stream, StreamPackets
from rtpaudit.metrics.gaps import spacing_ns
from rtpaudit.metrics.loss import missing_runs
from rtpaudit.metrics.network import NetworkFigures
from rtpaudit.metrics.windows import window_of
from rtpaudit.playout.buffer import Played
from rtpaudit.units import NS_PER_S


@dataclass(frozen=True, slots=True)
class Restored:
    """What the receiver's buffer made of the recovered packets of a stream. Arrays of shape (recovered,) but one."""

    in_time: NDArray[np.bool_]
    """packets that are no audio always are"""
    audio: NDArray[np.bool_]
    place: NDArray[np.int64]
    """among all expected packets"""
    required_ns: NDArray[np.int64]
    """as in ``Played``; of no meaning where it is no audio"""
    per_window: NDArray[np.int64]
    """shape (windows,): those in time, where they were missing"""

    @property
    def count(self) -> int:
        """Lost packets that were heard all the same."""
        return int(self.in_time.sum())


def restore(
    stream: Stream, network: NetworkFigures, rows: NDArray[np.int64], played: Played, started_ns: int
) -> Restored | None:
    """Play the recovered packets of a stream beside those that arrived; None where there are none.

    ``rows`` are the audio packets that ``played`` tells of. A recovered packet is due when its place in the media is,
    and comes with the packet that brings its copy.
    """
    found = stream.recovered
    if found is None:
        return None
    packets, sequence = stream.packets, network.sequence
    at = before_in_sequence(stream, sequence.order)
    place = sequence.place[at] + found.extended - packets.extended[sequence.order[at]]
    near = before_in_sequence(stream, rows)
    pace = NS_PER_S / stream.clock_rate_hz
    media_ns = np.rint((found.media_ticks - packets.media_ticks[rows[near]]) * pace).astype(np.int64)
    later = found.time_ns - packets.time_ns[rows[near]] - media_ns
    slack = played.playout_ns[near] - packets.time_ns[rows[near]] - later
    audio = found.content == Content.AUDIO
    in_time = ~audio | (slack >= 0)
    return Restored(
        in_time=in_time,
        audio=audio,
        place=place,
        required_ns=played.required_ns[near] + later,
        per_window=_per_window(stream, network, at[in_time], found.extended[in_time], started_ns),
    )


def before_in_sequence(stream: Stream, rows: NDArray[np.int64]) -> NDArray[np.int64]:
    """For each recovered packet which of ``rows`` comes before it in sequence, or first where none does.

    Parameters
    ----------
    stream : Stream
        With recovered packets.
    rows : int64 array, shape (n,)
        Distinct packets of the stream in any order.

    Returns
    -------
    int64 array, shape (recovered,)
        Index into ``rows``.
    """
    assert stream.recovered is not None
    key, wanted = _key(stream.packets)[rows], _key(stream.recovered)
    order = np.argsort(key, kind="stable")
    return np.asarray(order[np.maximum(np.searchsorted(key[order], wanted) - 1, 0)])


def _key(packets: StreamPackets) -> NDArray[np.int64]:
    """Segment and extended sequence number in one; the number may lie a little below 0."""
    return packets.segment.astype(np.int64) << 42 | (packets.extended + (1 << 20)) & ((1 << 42) - 1)


def _per_window(
    stream: Stream, network: NetworkFigures, at: NDArray[np.int64], extended: NDArray[np.int64], started_ns: int
) -> NDArray[np.int64]:
    """Restored packets per window, each in the one in which it was missing."""
    packets, sequence = stream.packets, network.sequence
    runs = missing_runs(sequence, packets.extended, packets.segment)
    run = np.searchsorted(runs.position, at)
    spacing = spacing_ns(network.gaps, runs, packets.time_ns)[run]
    missing_ns = network.gaps.at_ns[run] + spacing * (extended - runs.first_missing[run] + 1)
    count = len(network.windows.from_s)
    return np.bincount(window_of(missing_ns, started_ns, count), minlength=count).astype(np.int64)
