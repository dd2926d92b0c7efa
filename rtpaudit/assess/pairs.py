"""Both directions of a call laid side by side: echo of what one side said, and passages in which neither is heard."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.hearing import StreamSound
from rtpaudit.assess.laying import lay_out, sent_samples
from rtpaudit.audio.echo import Echo, echo_of
from rtpaudit.audio.silence import Passage, dead_air_together
from rtpaudit.capture.frames import Octets
from rtpaudit.media.calls import Call
from rtpaudit.media.streams import Stream
from rtpaudit.units import NS_PER_S

Samples = NDArray[np.int16]

SURE_PCT = 80.0
"""confidence from which an echo enters the rating"""


@dataclass(slots=True)
class CallSound:
    """What only both directions together tell. Delays and losses of echo are estimates at the capture point."""

    echo_to_caller: Echo | None = None
    """what the caller said, heard again by the caller"""
    echo_to_callee: Echo | None = None
    dead_air: list[Passage] = field(default_factory=list)
    """neither side is heard; seconds after the first sample of the direction that began first"""
    from_ns: int = 0
    """capture time of that sample"""


def sound_of_call(
    call: Call, sounds: Mapping[int, StreamSound], buffers: Sequence[Sequence[Octets]]
) -> CallSound | None:
    """Echo and common silence of a call; ``sounds`` by identity of the stream. None without sound both ways."""
    one, other = _longest(call.from_caller, sounds), _longest(call.from_callee, sounds)
    if one is None or other is None:
        return None
    heard_one, heard_other = sounds[id(one)], sounds[id(other)]
    lead_s = (heard_other.origin_ns - heard_one.origin_ns) / NS_PER_S
    found = CallSound(
        dead_air=dead_air_together(heard_one.scanned, heard_other.scanned, lead_s),
        from_ns=min(heard_one.origin_ns, heard_other.origin_ns),
    )
    if heard_one.rate_hz == heard_other.rate_hz:
        first, second = _aligned(one, other, lead_s, buffers)
        found.echo_to_caller = echo_of(first, second, heard_one.rate_hz)
        found.echo_to_callee = echo_of(second, first, heard_one.rate_hz)
    return found


def _longest(streams: Sequence[Stream], sounds: Mapping[int, StreamSound]) -> Stream | None:
    sounding = [stream for stream in streams if id(stream) in sounds]
    return max(sounding, key=lambda stream: sounds[id(stream)].scanned.samples, default=None)


def _aligned(one: Stream, other: Stream, lead_s: float, buffers: Sequence[Sequence[Octets]]) -> tuple[Samples, Samples]:
    """What both said while both sounded, sample by sample at one capture time; ``one`` began ``lead_s`` before."""
    laid = [lay_out(stream) for stream in (one, other)]
    samples = [
        sent_samples(stream, place, buffers[stream.recording]) for stream, place in zip((one, other), laid, strict=True)
    ]
    shift = round(lead_s * laid[0].rate_hz)
    first, second = samples[0][max(shift, 0) :], samples[1][max(-shift, 0) :]
    length = min(len(first), len(second))
    return first[:length], second[:length]


def echo_loudness(sound: CallSound | None, to_caller: bool, slr_db: float, rlr_db: float) -> float:
    """Talker echo loudness rating of one listener, NaN where no echo is sure. [dB]

    TELR is the loss of the echo path with the loudness ratings of the talker's own telephone on top (ITU-T G.131 and
    G.107, from memory).
    """
    echo = None if sound is None else sound.echo_to_caller if to_caller else sound.echo_to_callee
    if echo is None or echo.confidence_pct < SURE_PCT:
        return float("nan")
    return slr_db + rlr_db + echo.loss_db
