"""What the rules ask of one stream beyond its figures, worked out once and only when asked for."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.media_time import clock_rates
from rtpaudit.assess.playback import Playback, is_audio
from rtpaudit.assess.results import AssessedStream
from rtpaudit.findings.rated import Rated
from rtpaudit.media.streams import Stream, StreamPackets
from rtpaudit.metrics.delay import delay_variation, delays
from rtpaudit.metrics.loss import MissingRuns, Sequence, in_sequence, missing_runs
from rtpaudit.profile import Playout, Profile
from rtpaudit.signalling.rtcp_voip import VoipMetrics
from rtpaudit.units import NS_PER_MS, NS_PER_S

PASSAGE_PACKETS = 3
"""neighbours that are late together make a passage of delay"""

Mask = NDArray[np.bool_]
Indices = NDArray[np.int64]
Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Gone:
    """What the listener did without: runs of missing packets and single late ones, in order of the stream.

    Shape (items,).
    """

    place: Indices
    """of the first packet among all expected"""
    packets: Indices
    late: Mask
    """came too late for the playout buffer; else it was never captured"""
    from_ns: Indices
    """when it should have been there, on the clock of the arrivals"""
    to_ns: Indices

    def __len__(self) -> int:
        return len(self.place)


@dataclass(frozen=True, slots=True)
class Timed:
    """Audio packets whose delay can be told, each number once, in order of arrival. Shape (timed,)."""

    row: Indices
    """within the stream's packets"""
    time_s: Floats
    """arrival since the stream began"""
    delay_ms: Floats
    """beyond the smallest of the stream, clock skew taken out"""


class StreamFacts:
    """One stream as the rules see it."""

    def __init__(self, assessed: AssessedStream, profile: Profile) -> None:
        self.assessed = assessed
        self.profile = profile
        self.remembered: dict[str, object] = {}
        """what rules worked out and ask for again"""

    @property
    def id(self) -> str:
        """Id of the stream."""
        return self.assessed.id

    @property
    def stream(self) -> Stream:
        """The stream itself."""
        return self.assessed.stream

    @property
    def packets(self) -> StreamPackets:
        """Its packets as columns."""
        return self.assessed.stream.packets

    @property
    def packet_time_ms(self) -> float:
        """Of most packets; 20 where it is unknown. [ms]"""
        known = self.stream.packet_time_ms
        return known if known > 0 else 20.0

    @property
    def duration_s(self) -> float:
        """First to last arrival. [s]"""
        return (self.assessed.ended_ns - self.assessed.started_ns) / NS_PER_S

    @cached_property
    def rated(self) -> Rated:
        """The rating as a function of what may change."""
        return Rated(self.assessed, self.profile)

    @cached_property
    def sequence(self) -> Sequence:
        """Distinct packets in order, and their places among the expected."""
        packets = self.packets
        return in_sequence(packets.extended, packets.segment, packets.duplicate)

    @cached_property
    def runs(self) -> MissingRuns:
        """Runs of missing numbers with the packets on both sides."""
        return missing_runs(self.sequence, self.packets.extended, self.packets.segment)

    @cached_property
    def audio(self) -> Mask:
        """Which packets carry speech, copies included."""
        return is_audio(self.stream)

    @cached_property
    def timed(self) -> Timed:
        """Delays of the audio packets."""
        packets = self.packets
        rates = np.broadcast_to(np.asarray(clock_rates(self.stream), np.int32), len(packets))
        row = np.flatnonzero(self.audio & ~packets.duplicate & (rates > 0))
        found = delays(packets.time_ns[row], packets.media_ticks[row], packets.segment[row], rates[row])
        variation = delay_variation(found, self.assessed.figures.clock_skew_ppm)
        return Timed(row, (packets.time_ns[row] - self.assessed.started_ns) / NS_PER_S, variation)

    @cached_property
    def reported_voice(self) -> VoipMetrics | None:
        """Last voice-quality block of the listener (RFC 3611, 4.7), None where it sent none."""
        far = self.assessed.far_end
        blocks = [one.block for one in far.metrics if isinstance(one.block, VoipMetrics)] if far is not None else []
        return blocks[-1] if blocks else None

    @property
    def buffer_reported_ms(self) -> float:
        """Delay of the listener's playout buffer as it reports it, 0 where it does not. [ms]"""
        return float(self.reported_voice.playout_nominal_ms) if self.reported_voice is not None else 0.0

    @property
    def discard_reported_pct(self) -> float:
        """Packets that the listener reports to have come too late, NaN where it does not report. [%]"""
        return self.reported_voice.discard_pct if self.reported_voice is not None else float("nan")

    @property
    def buffer_given(self) -> bool:
        """Whether the user told its delay: the default says nothing about the listener."""
        return self.profile.playout != Playout()

    @property
    def playback(self) -> Playback | None:
        """What the playout buffer made of it; None without a clock rate."""
        return self.assessed.playback

    @cached_property
    def late(self) -> Mask:
        """Which packets came too late for the playout buffer."""
        late = np.zeros(len(self.packets), np.bool_)
        if self.playback is not None:
            late[self.playback.discarded] = True
        return late

    def late_within_talkspurt(self, row: int) -> Indices:
        """Late items from a row on, until the end of the talkspurt that it belongs to."""
        playback, late = self.playback, self.late_items
        if playback is None or not len(late):
            return late[:0]
        at = int(np.searchsorted(playback.rows, row))
        if at == len(playback.rows):
            return late[:0]
        spurt = np.full(len(self.packets), -1, np.int64)
        spurt[playback.rows] = playback.played.talkspurt
        return np.asarray(late[(self.late_rows >= row) & (spurt[self.late_rows] == playback.played.talkspurt[at])])

    @cached_property
    def gone(self) -> Gone:
        """Everything the listener did without."""
        runs, sequence, packets = self.runs, self.sequence, self.packets
        step_ns = round(self.packet_time_ms * NS_PER_MS)
        lost_from = packets.time_ns[runs.before] + step_ns
        lost_place = sequence.place[runs.position] + 1
        late_at = np.flatnonzero(self.late[sequence.order])
        late_ns = packets.time_ns[sequence.order[late_at]]
        place = np.concatenate([lost_place, sequence.place[late_at]])
        order = np.argsort(place, kind="stable")
        late = np.repeat([False, True], [len(lost_place), len(late_at)])
        return Gone(
            place[order],
            np.concatenate([runs.packets, np.ones(len(late_at), np.int64)])[order],
            late[order],
            np.concatenate([lost_from, late_ns])[order],
            np.concatenate([lost_from + np.maximum(runs.packets - 1, 0) * step_ns, late_ns])[order],
        )

    @cached_property
    def lost_items(self) -> Indices:
        """Items of ``gone`` that are runs of missing packets; they stand in the order of ``runs``."""
        return np.flatnonzero(~self.gone.late)

    @cached_property
    def late_items(self) -> Indices:
        """Items of ``gone`` that are late packets."""
        return np.flatnonzero(self.gone.late)

    @cached_property
    def late_rows(self) -> Indices:
        """Row within the stream's packets of each of ``late_items``."""
        order = self.sequence.order
        return order[self.late[order]]

    @cached_property
    def overtaken(self) -> Mask:
        """Which distinct packets came after one with a higher number (RFC 4737, 3)."""
        packets = self.packets
        number = packets.segment.astype(np.int64) << 48 | packets.extended
        number = np.where(packets.duplicate, np.iinfo(np.int64).min, number)
        return np.asarray((number < np.maximum.accumulate(number)) & ~packets.duplicate)

    @cached_property
    def strayed(self) -> Mask:
        """Overtaken packets by themselves: where three in a row came late, the way was slow and not the packet."""
        order = self.sequence.order
        late = np.concatenate([[False], self.overtaken[order], [False]])
        edges = np.flatnonzero(np.diff(late.astype(np.int8)))
        alone = np.zeros(len(self.packets), np.bool_)
        for begin, end in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True):
            if end - begin < PASSAGE_PACKETS:
                alone[order[begin:end]] = True
        return alone

    @cached_property
    def delay_of_row(self) -> Floats:
        """Delay variation of each packet, NaN where it cannot be told. Shape (n,) [ms]"""
        delay = np.full(len(self.packets), np.nan)
        delay[self.timed.row] = self.timed.delay_ms
        return delay

    def forget(self) -> None:
        """Let go of the columns, which take as much memory as the packets; they are worked out again when asked for."""
        for name in HEAVY:
            self.__dict__.pop(name, None)
        self.remembered.clear()

    def calm_delay_ms(self, share_pct: float) -> float:
        """Delay variation that so many of the packets stay at or below; NaN without any. [ms]"""
        return float(np.percentile(self.timed.delay_ms, share_pct)) if len(self.timed.delay_ms) else float("nan")


HEAVY = tuple(name for name, value in vars(StreamFacts).items() if isinstance(value, cached_property))


def is_cut(facts: StreamFacts) -> bool:
    """Whether the capture cut a stream's packets short, so that its sound cannot be judged."""
    return bool((facts.packets.captured < facts.packets.length).mean() > 0.01)
