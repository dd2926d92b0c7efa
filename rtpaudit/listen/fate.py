"""What became of the packets of a clip, and the opinion that the E-model predicts of it.

Listeners of a clip do not converse, so the prediction leaves out what only delay brings: Ta, T and Tr are 0.
"""

from dataclasses import dataclass, replace

import numpy as np

from rtpaudit.assess.laying import Laid
from rtpaudit.assess.playback import Playback
from rtpaudit.assess.rating import codec_columns
from rtpaudit.emodel.g107 import mos_from_r, rating
from rtpaudit.media.streams import Stream
from rtpaudit.metrics.bursts import burst_ratio, loss_runs
from rtpaudit.metrics.loss import in_sequence
from rtpaudit.profile import Profile
from rtpaudit.units import percent


@dataclass(frozen=True, slots=True)
class Fate:
    """Packets of a clip."""

    packets_expected: int
    packets_lost: int
    packets_discarded: int
    burst_ratio: float
    """of lost and discarded packets together, NaN where there are none"""

    @property
    def missing_pct(self) -> float:
        """Lost and discarded packets of those expected. [%]"""
        return percent(self.packets_lost + self.packets_discarded, self.packets_expected)


@dataclass(frozen=True, slots=True)
class Prediction:
    """What listeners are expected to say of a clip; NaN where the encoding has no values."""

    r_factor: float
    mos: float


def fate_of(stream: Stream, laid: Laid, playback: Playback | None, begin: int, end: int) -> Fate:
    """Packets of a stream between two samples of its timeline: from its first packet that arrived to its last.

    Parameters
    ----------
    stream : Stream
    laid : Laid
        Where its packets lie.
    playback : Playback or None
        None where none came too late.
    begin, end : int
        [samples]
    """
    packets = stream.packets
    inside = laid.rows[(laid.position >= begin) & (laid.position < end)]
    if not len(inside):
        return Fate(0, 0, 0, float("nan"))
    sequence = in_sequence(packets.extended, packets.segment, packets.duplicate)
    place = np.full(len(packets), -1, np.int64)
    place[sequence.order] = sequence.place
    first, last = int(place[inside].min()), int(place[inside].max())
    late = np.zeros(len(packets), np.bool_)
    if playback is not None:
        late[playback.discarded] = True
    within = (sequence.place >= first) & (sequence.place <= last)
    in_time = within & ~late[sequence.order]
    expected = last - first + 1
    return Fate(
        expected,
        expected - int(within.sum()),
        int(within.sum() - in_time.sum()),
        burst_ratio(loss_runs(sequence.place[in_time] - first, expected)),
    )


def predict(stream: Stream, fate: Fate, profile: Profile) -> Prediction:
    """Rating and opinion by ITU-T G.107 with the packets of a clip and no delay."""
    codec = codec_columns([stream], profile)
    if not fate.packets_expected:
        return Prediction(float("nan"), float("nan"))
    planning = replace(profile.planning, Ta=0.0, T=0.0, Tr=0.0)
    R = float(rating(planning, Ie=codec.Ie[0], Bpl=codec.Bpl[0], Ppl=fate.missing_pct, BurstR=fate.burst_ratio).R)
    return Prediction(R, mos_from_r(R))
