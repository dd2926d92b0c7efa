"""A stream at the receiver's playout buffer: what was late, what the ear missed, what other buffers would have done."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.media_time import common_ticks
from rtpaudit.assess.restored import Restored, restore
from rtpaudit.codecs import CODECS
from rtpaudit.media.streams import Content, Stream, StreamPackets
from rtpaudit.metrics.bursts import BurstGap, burst_ratio, bursts_and_gaps, loss_runs
from rtpaudit.metrics.network import NetworkFigures
from rtpaudit.metrics.windows import window_of
from rtpaudit.playout.buffer import Played, play, talkspurts
from rtpaudit.playout.what_if import WhatIf, what_if
from rtpaudit.profile import Playout
from rtpaudit.signalling.payload_types import Encoding
from rtpaudit.units import MS_PER_S, percent

INTERLEAVED = ("PCMU", "PCMA", "L8", "L16")
"""encodings whose channels alternate sample by sample (RFC 3551, 4.1)"""


@dataclass(frozen=True, slots=True)
class Playback:
    """What the receiver's buffer made of a stream."""

    rows: NDArray[np.int64]
    """rows of the distinct audio packets, in order of arrival; the columns of ``played`` belong to them"""
    played: Played
    discarded: NDArray[np.int64]
    """rows that came too late"""
    discarded_per_window: NDArray[np.int64]
    expected: int
    burst_ratio: float
    """of lost and discarded packets together"""
    burst_gap: BurstGap
    other_buffers: Callable[[], WhatIf]
    """works out the same arrivals at fixed buffers of other delays"""
    restored: Restored | None = None
    """lost packets that came within others; None where there are none"""

    @property
    def discard_pct(self) -> float:
        """Late packets of those expected. [%]"""
        return percent(len(self.discarded), self.expected)

    @property
    def restored_packets(self) -> int:
        """Lost packets that came within others in time, and so were heard."""
        return self.restored.count if self.restored else 0

    @property
    def missed_per_window(self) -> NDArray[np.int64]:
        """What the ear missed beyond the lost packets: late ones, less restored ones."""
        return self.discarded_per_window - (self.restored.per_window if self.restored else 0)


def play_back(stream: Stream, network: NetworkFigures, settings: Playout, started_ns: int) -> Playback | None:
    """Simulate the playout of a stream; None where its clock is not known or it has no audio."""
    packets = stream.packets
    distinct = np.flatnonzero(~packets.duplicate)
    audio = is_audio(stream)[distinct]
    rows = distinct[audio]
    if not len(rows) or stream.clock_rate_hz == 0:
        return None
    sequence, segment = packets.extended[distinct], packets.segment[distinct]
    media_ticks = common_ticks(stream)
    time_ns, ticks = packets.time_ns[rows], media_ticks[rows]
    pause = round(settings.reset_pause_ms * stream.clock_rate_hz / MS_PER_S)
    spurt = talkspurts(
        sequence,
        segment,
        media_ticks[distinct],
        packet_ticks(stream)[distinct],
        pause,
        audio=None if len(rows) == len(distinct) else audio,
    )
    skew = network.clock_skew_ppm
    played = play(time_ns, ticks, spurt, stream.clock_rate_hz, settings, skew)
    restored = restore(stream, network, rows, played, started_ns)

    def other_buffers() -> WhatIf:
        fixed, again = played, restored
        if settings.kind != "fixed":
            fixed = play(time_ns, ticks, spurt, stream.clock_rate_hz, replace(settings, kind="fixed"), skew)
            again = restore(stream, network, rows, fixed, started_ns)
        return _other_buffers(stream, fixed, again, sequence, segment, audio)

    discarded = rows[~played.played]
    kept = np.ones(len(packets), np.bool_)
    kept[discarded] = False
    place = network.sequence.place
    if len(discarded):
        place = place[kept[network.sequence.order]]
    if restored is not None:
        place = np.union1d(place, restored.place[restored.in_time])
    runs = loss_runs(place, network.packets_expected)
    windows = len(network.windows.from_s)
    return Playback(
        rows=rows,
        played=played,
        discarded=discarded,
        discarded_per_window=np.bincount(
            window_of(packets.time_ns[discarded], started_ns, windows), minlength=windows
        ).astype(np.int64),
        expected=network.packets_expected,
        burst_ratio=burst_ratio(runs),
        burst_gap=bursts_and_gaps(runs, stream.packet_time_ms),
        other_buffers=other_buffers,
        restored=restored,
    )


def _other_buffers(
    stream: Stream,
    fixed: Played,
    restored: Restored | None,
    sequence: NDArray[np.int64],
    segment: NDArray[np.int32],
    audio: NDArray[np.bool_],
) -> WhatIf:
    """The arrivals at other buffers, recovered packets among them."""
    found = stream.recovered
    if found is None or restored is None:
        return what_if(fixed.required_ns, sequence, segment, audio)
    return what_if(
        np.concatenate([fixed.required_ns, restored.required_ns[restored.audio]]),
        np.concatenate([sequence, found.extended]),
        np.concatenate([segment, found.segment]),
        np.concatenate([audio, restored.audio]),
    )


def is_audio(stream: Stream) -> NDArray[np.bool_]:
    """Which packets carry sound: neither telephone events nor comfort noise."""
    content = stream.packets.content
    return np.asarray((content == Content.AUDIO) | (content == Content.REDUNDANT))


def channels_of(encoding: Encoding) -> int:
    """Samples of one instant that lie side by side in a payload."""
    return encoding.channels if encoding.name in INTERLEAVED else 1


def packet_ticks(stream: Stream, packets: StreamPackets | None = None) -> NDArray[np.int64]:
    """Media time that each packet carries, by its length where that tells, else that of most packets.

    In ticks of the stream's main clock, whatever the packet's own. ``packets`` are the stream's, or its recovered ones.
    """
    packets = stream.packets if packets is None else packets
    usual = 0 if np.isnan(stream.packet_time_ms) else round(stream.packet_time_ms * stream.clock_rate_hz / MS_PER_S)
    ticks = np.full(len(packets), usual, np.int64)
    for number, encoding in stream.encodings.items():
        codec = CODECS.get(encoding.name)
        if codec is not None and codec.octets_per_block and not stream.encrypted:
            mine = packets.payload_type == number
            samples = packets.length[mine] // codec.octets_per_block * codec.samples_per_block // channels_of(encoding)
            ticks[mine] = samples * stream.clock_rate_hz // codec.sampling_rate(encoding.clock_rate_hz)
    return ticks
