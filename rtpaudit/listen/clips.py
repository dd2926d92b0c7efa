"""Clips for a listening check: chosen, cut, brought to one level, limited, and put into an order that tells nothing."""

import hashlib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.laying import Laid, lay_out
from rtpaudit.assess.results import Assessment
from rtpaudit.audio.scan import BLOCKS_PER_S
from rtpaudit.listen.cuts import Cut, cut_around
from rtpaudit.listen.fate import Fate, Prediction, fate_of, predict
from rtpaudit.listen.places import ANCHOR, Place, anchor_places, worst_places
from rtpaudit.listen.safety import Levelled, level_clip
from rtpaudit.profile import Profile

if TYPE_CHECKING:
    from pandas import DataFrame

Samples = NDArray[np.int16]

ANCHORS = 3
"""one clip in so many is an anchor, and of two one"""
FROM_ONE_STREAM = 2
"""clips of each kind at first; more where other streams have none"""
TRIED = 8
"""places of each stream for each clip that is asked for"""


class Sounding(Protocol):
    """Where the sound of streams comes from."""

    def heard(self, stream_id: str, /) -> tuple[Samples, int]:
        """A stream after playout and concealment, and its sampling rate."""


@dataclass(frozen=True, slots=True)
class Clip:
    """One clip with all that the key tells of it."""

    place: Place
    cut: Cut
    rate_hz: int
    levelled: Levelled
    fate: Fate
    prediction: Prediction

    @property
    def begin_s(self) -> float:
        """Where it begins on the timeline of its stream. [s]"""
        return self.cut.begin / BLOCKS_PER_S

    @property
    def duration_s(self) -> float:
        """Its length. [s]"""
        return len(self.levelled.samples) / self.rate_hz


def make_clips(
    assessment: Assessment,
    findings: "DataFrame",
    source: Sounding,
    profile: Profile,
    count: int,
    seed: int,
    digits: bool = False,
) -> list[Clip]:
    """At most ``count`` clips, a third of them anchors, in an order that follows from the seed alone.

    Parameters
    ----------
    assessment : Assessment
        Streams with their sound measured.
    findings : DataFrame
        The table of that name.
    source : Sounding
        Gives the sound as heard.
    profile : Profile
        Level, peak and length of clips; planning values of the prediction.
    count : int
        Clips asked for.
    seed : int
        Of the order.
    digits : bool
        Whether clips may hold keys pressed, which may be those of a card number.
    """
    anchors = max(count // ANCHORS, int(count > 1))
    maker = _Maker(source, profile, digits)
    most = TRIED * count
    worst = maker.take(worst_places(assessment.calls, findings, most), count - anchors)
    sound = maker.take(anchor_places(assessment.calls, findings, most, profile.listening.clip_s), anchors)
    return sorted(worst + sound, key=lambda one: _lot(one, seed))


def _lot(clip: Clip, seed: int) -> bytes:
    """What decides the place of a clip in the order, and says nothing about it."""
    return hashlib.sha256(f"{seed} {clip.place.one.id} {clip.cut.begin}".encode()).digest()


def _holds_digits(place: Place, cut: Cut) -> bool:
    begin_s, end_s = cut.begin / BLOCKS_PER_S, cut.end / BLOCKS_PER_S
    return any(one.from_s < end_s and begin_s < one.to_s for one in place.sound.digits)


class _Maker:
    """Cuts clips as long as they are wanted, and remembers what it took from where."""

    def __init__(self, source: Sounding, profile: Profile, digits: bool) -> None:
        self._source = source
        self._profile = profile
        self._digits = digits
        self._taken: dict[str, list[Cut]] = {}
        self._last: tuple[str, Samples, Laid] | None = None

    def take(self, places: Sequence[Place], count: int) -> list[Clip]:
        """The first so many that can be cut, at first a few of each stream."""
        clips: list[Clip] = []
        for most in (FROM_ONE_STREAM, count):
            for place in places:
                if len(clips) >= count:
                    return clips
                mine = sum(clip.place.one.id == place.one.id for clip in clips)
                if mine < most:
                    clips += self._cut(place)
        return clips

    def _cut(self, place: Place) -> Iterator[Clip]:
        """A clip around a place, where one can be cut there."""
        taken = self._taken.setdefault(place.one.id, [])
        aim_s = self._profile.listening.clip_s
        cut = cut_around(place.sound.scanned, place.sound.level, place.begin_s, place.end_s, aim_s, taken)
        if cut is None:
            return
        clip = self._made(place, cut)
        if clip is not None:
            taken.append(cut)
            yield clip

    def _made(self, place: Place, cut: Cut) -> Clip | None:
        heard, laid = self._heard(place)
        begin, end = (block * place.sound.scanned.block_samples for block in (cut.begin, cut.end))
        passage = heard[begin:end]
        fate = fate_of(place.one.stream, laid, place.one.playback, begin, end)
        if place.kind == ANCHOR and fate.packets_lost + fate.packets_discarded:
            return None
        if not self._digits and _holds_digits(place, cut):
            return None
        levelled = level_clip(passage, laid.rate_hz, self._profile.listening)
        if levelled is None:
            return None
        return Clip(place, cut, laid.rate_hz, levelled, fate, predict(place.one.stream, fate, self._profile))

    def _heard(self, place: Place) -> tuple[Samples, Laid]:
        if self._last is None or self._last[0] != place.one.id:
            self._last = place.one.id, self._source.heard(place.one.id)[0], lay_out(place.one.stream)
        return self._last[1:]
