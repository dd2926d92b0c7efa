"""All streams and calls at the audio bench, one after the other, so that no more than one call is decoded at a time."""

from collections.abc import Sequence

from rtpaudit.assess.hearing import StreamSound, begins_after_pauses, hear, payload_signs, received_mask
from rtpaudit.assess.laying import lay_out, sent_samples, silence_reason
from rtpaudit.assess.pairs import CallSound, echo_loudness, sound_of_call
from rtpaudit.assess.stream import Measured
from rtpaudit.capture.frames import Octets
from rtpaudit.media.calls import Call
from rtpaudit.profile import Profile

SHORTEST_S = 0.2
"""of sound: in less nothing can be measured"""


def listen_to(
    measured: Sequence[Measured], calls: Sequence[Call], buffers: Sequence[Sequence[Octets]], profile: Profile
) -> dict[int, CallSound]:
    """Measure the sound of every stream and take it into its figures; sound of calls by their identity."""
    sounds: dict[int, StreamSound] = {}
    by_stream = {id(one.stream): one for one in measured}
    for one in measured:
        if one.stream.media != "audio":
            continue
        one.signs = payload_signs(one.stream, buffers[one.stream.recording])
        one.stream.encrypted |= one.signs.encrypted
        one.sound = _hear(one, buffers[one.stream.recording])
        if one.sound is not None:
            sounds[id(one.stream)] = one.sound
            _note(one, one.sound)
    found: dict[int, CallSound] = {}
    for call in calls:
        pair = sound_of_call(call, sounds, buffers)
        if pair is not None:
            found[id(call)] = pair
            for to_caller, streams in ((True, call.from_callee), (False, call.from_caller)):
                telr = echo_loudness(pair, to_caller, profile.planning.SLR, profile.planning.RLR)
                for stream in streams:
                    by_stream[id(stream)].telr_db = telr
    return found


def _hear(one: Measured, buffers: Sequence[Octets]) -> StreamSound | None:
    if silence_reason(one.stream):
        return None
    laid = lay_out(one.stream, one.network.clock_skew_ppm)
    samples = sent_samples(one.stream, laid, buffers)
    if len(samples) < SHORTEST_S * laid.rate_hz:
        return None
    received = received_mask(one.stream, laid.rows, laid.position, laid.rate_hz, len(samples))
    begins = begins_after_pauses(one.stream, laid.rows, laid.position, laid.rate_hz)
    return hear(one.stream, samples, received, laid.rate_hz, laid.origin_ns, begins)


def _note(one: Measured, sound: StreamSound) -> None:
    one.figures.speech_level_dbov = sound.level.active_dbov
    one.figures.activity_pct = sound.level.activity_pct
    one.figures.noise_level_dbov = sound.noise_dbov
    one.figures.clipped_pct = sound.clipping.clipped_pct
