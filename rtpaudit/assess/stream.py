"""One stream at the benches: its network figures, and what the E-model asks of it."""

from dataclasses import dataclass

import numpy as np

from rtpaudit.assess.hearing import PayloadSigns, StreamSound
from rtpaudit.assess.media_time import clock_rates
from rtpaudit.assess.playback import Playback, is_audio, play_back
from rtpaudit.assess.rating import Path
from rtpaudit.assess.reported import FarEnd
from rtpaudit.assess.results import STREAM_FIGURES, GapColumns, StreamFigures
from rtpaudit.media.streams import Stream
from rtpaudit.metrics.network import NetworkFigures, network_figures
from rtpaudit.profile import Profile
from rtpaudit.units import percent


@dataclass(slots=True)
class Measured:
    """A stream with its figures before rating."""

    stream: Stream
    started_ns: int
    ended_ns: int
    network: NetworkFigures
    figures: StreamFigures
    playback: Playback | None
    far_end: FarEnd | None = None
    sound: StreamSound | None = None
    signs: PayloadSigns | None = None
    telr_db: float = float("nan")
    """talker echo loudness rating of the listener, NaN where no echo is sure [dB]"""

    @property
    def gaps(self) -> GapColumns:
        """Rows of the gaps table; the number as it stands in the header."""
        found = self.network.gaps
        return GapColumns(
            found.first_missing & 0xFFFF, found.packets_missing, found.at_ns, found.duration_ms, found.after_s
        )

    @property
    def lost_to_the_ear(self) -> int:
        """Lost packets, less those that came within others in time."""
        return self.network.packets_lost - (self.playback.restored_packets if self.playback else 0)

    def _missed_pct(self) -> float:
        """Share of the expected packets that the ear missed: lost or late, and not restored. [%]"""
        if self.playback is None:
            return self.figures.loss_pct
        return percent(self.lost_to_the_ear, self.network.packets_expected) + self.playback.discard_pct

    def path(self, profile: Profile) -> Path:
        """What the rating asks of this stream."""
        given = profile.network.delay_ms
        trip = float("nan") if self.far_end is None else self.far_end.round_trip_ms
        measured = given is None and not np.isnan(trip)
        return Path(
            loss_pct=self._missed_pct(),
            burst_ratio=self.figures.burst_ratio,
            network_ms=trip / 2.0 if given is None else given,
            network_basis="rtcp" if measured else "" if given is None else "given",
            playout_ms=self.figures.playout_delay_ms,
            telr_db=self.telr_db,
        )


_SHARED = tuple(name for name in STREAM_FIGURES if name in NetworkFigures.__dataclass_fields__)


def measure(stream: Stream, profile: Profile) -> Measured:
    """The network figures of one stream, and what the receiver's buffer makes of it."""
    packets = stream.packets
    started_ns, ended_ns = int(packets.time_ns.min()), int(packets.time_ns.max())
    network = network_figures(
        packets.time_ns,
        packets.extended,
        packets.segment,
        packets.duplicate,
        packets.media_ticks,
        is_audio(stream),
        clock_rates(stream),
        stream.packet_time_ms,
        started_ns,
    )
    figures = StreamFigures(**{name: getattr(network, name) for name in _SHARED})
    figures.packets_recovered = len(stream.recovered) if stream.recovered is not None else 0
    figures.dscp = int(np.bincount(packets.dscp).argmax())
    playback = play_back(stream, network, profile.playout, started_ns) if stream.media == "audio" else None
    figures.playout_delay_ms = profile.playout.nominal_ms
    if playback is not None:
        _note_playback(figures, playback)
    return Measured(stream, started_ns, ended_ns, network, figures, playback)


def _note_playback(figures: StreamFigures, playback: Playback) -> None:
    if not np.isnan(playback.played.mean_delay_ms):
        figures.playout_delay_ms = playback.played.mean_delay_ms
    figures.packets_discarded = len(playback.discarded)
    figures.discard_pct = playback.discard_pct
    figures.burst_ratio = playback.burst_ratio
    figures.burst_density_pct = playback.burst_gap.burst_density_pct
    figures.burst_duration_ms = playback.burst_gap.burst_duration_ms
    figures.gap_density_pct = playback.burst_gap.gap_density_pct
    figures.gap_duration_ms = playback.burst_gap.gap_duration_ms


def note_far_end(one: Measured, far: FarEnd | None) -> None:
    """Take what was reported on a stream into its figures."""
    one.far_end = far
    if far is not None:
        one.figures.reported_loss_pct = far.reported_loss_pct
        one.figures.reported_jitter_ms = far.reported_jitter_ms
        one.figures.round_trip_ms = far.round_trip_ms
        one.figures.loss_before_pct = far.loss_before_pct
        one.figures.loss_after_pct = far.loss_after_pct
