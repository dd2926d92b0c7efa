"""The sound of streams and calls: payloads decoded and laid on the RTP timeline, directions laid side by side."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.ear import heard_samples
from rtpaudit.assess.playback import packet_ticks
from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.capture.frames import Octets
from rtpaudit.codecs import codec_of, decode, sample_table
from rtpaudit.errors import MissingCodec
from rtpaudit.media.streams import Content, Stream
from rtpaudit.playout.timeline import gather, lay, lay_by_table, positions, span
from rtpaudit.units import NS_PER_S

Samples = NDArray[np.int16]

LONGEST_TIMELINE_S = 14 * 3600
"""Longer streams keep their figures; their WAV file would pass the 4 GB that its header can count at 48 kHz."""


@dataclass(frozen=True, slots=True)
class Laid:
    """Where the audio packets of a stream lie on its timeline."""

    rows: NDArray[np.int64]
    """rows of the stream's packets that carry audio and came first under their number, in order of arrival"""
    position: NDArray[np.int64]
    """first sample of each"""
    rate_hz: int
    origin_ns: int
    """capture time at which sample 0 arrived, or would have arrived with the least delay seen"""


class SoundSource:
    """Decoded audio of one audit's streams, made when it is asked for and never kept."""

    def __init__(
        self, buffers: Sequence[Sequence[Octets]], streams: Sequence[AssessedStream], conceals_loss: bool = True
    ) -> None:
        self.buffers = buffers
        self._conceals_loss = conceals_loss
        self._streams = {one.id: one for one in streams}

    def why_silent(self, stream_id: str) -> str:
        """Reason why a stream has no audio, "" where it has."""
        stream = self._streams[stream_id].stream
        return silence_reason(stream)

    def sent(self, stream_id: str) -> tuple[Samples, int]:
        """Every received payload on the RTP timeline, silence where lost; and the sampling rate. MissingCodec."""
        stream = self._streams[stream_id].stream
        laid = lay_out(stream)
        return sent_samples(stream, laid, self.buffers[stream.recording]), laid.rate_hz

    def heard(self, stream_id: str) -> tuple[Samples, int]:
        """The same after the playout buffer and concealment, as long as sent. MissingCodec."""
        one = self._streams[stream_id]
        laid = lay_out(one.stream)
        return self._heard(one, laid), laid.rate_hz

    def _heard(self, one: AssessedStream, laid: Laid) -> Samples:
        buffers = self.buffers[one.stream.recording]
        sent = sent_samples(one.stream, laid, buffers)
        return heard_samples(
            one.stream, one.playback, sent, laid.rows, laid.position, laid.rate_hz, buffers, self._conceals_loss
        )

    def both(self, call: AssessedCall) -> tuple[Samples, int]:
        """Both directions as heard, on the capture's clock: left what the caller said, right what the callee said.

        Skew is taken out by dropping or repeating single quiet samples, as a receiver's playout does; the directions of
        one file are at the higher sampling rate of the two.
        """
        sides = [self._side(streams) for streams in (call.from_caller, call.from_callee)]
        parts = [part for side in sides for part in side]
        if not parts:
            raise MissingCodec(f"call {call.id}: no stream of it can be decoded")
        rate = max(part[1] for part in parts)
        origin = min(part[2] for part in parts)
        placed = [
            [(_at_rate(samples, own, rate), round((at - origin) * rate / NS_PER_S)) for samples, own, at in side]
            for side in sides
        ]
        length = max(at + len(samples) for side in placed for samples, at in side)
        both = np.zeros((min(length, LONGEST_TIMELINE_S * rate), 2), np.int16)
        for column, side in enumerate(placed):
            for samples, at in side:
                both[at : at + len(samples), column] = samples[: max(0, len(both) - at)]
        return both, rate

    def _side(self, streams: Sequence[AssessedStream]) -> list[tuple[Samples, int, int]]:
        parts = []
        for one in streams:
            if silence_reason(one.stream):
                continue
            laid = lay_out(one.stream)
            parts.append((keep_time(self._heard(one, laid), one.figures.clock_skew_ppm), laid.rate_hz, laid.origin_ns))
        return parts


def silence_reason(stream: Stream) -> str:
    """Why a stream gives no audio, "" where it does."""
    if stream.media != "audio":
        return f"{stream.media} is not decoded"
    if stream.encrypted:
        return "encrypted"
    try:
        codec_of(stream.encoding)
    except MissingCodec as fault:
        return str(fault)
    return ""


def lay_out(stream: Stream) -> Laid:
    """Where the audio packets of a stream lie on its timeline."""
    packets = stream.packets
    rate = codec_of(stream.encoding).sampling_rate(stream.clock_rate_hz)
    fits = np.zeros(128, np.bool_)
    for number, encoding in stream.encodings.items():
        fits[number] = _decodes_at(encoding.name, encoding.clock_rate_hz, rate)
    chosen = fits[packets.payload_type] & (packets.content == Content.AUDIO) & ~packets.duplicate
    rows = np.flatnonzero(chosen)
    position = positions(
        packets.media_ticks[rows], packets.time_ns[rows], stream.clock_rate_hz, rate, packets.segment[rows]
    )
    early = packets.time_ns[rows] - (position * (NS_PER_S / rate)).astype(np.int64)
    return Laid(rows, position, rate, int(early.min()) if len(rows) else int(packets.time_ns[0]))


def _decodes_at(encoding: str, clock_rate_hz: int, rate_hz: int) -> bool:
    try:
        return codec_of(encoding).sampling_rate(clock_rate_hz) == rate_hz
    except MissingCodec:
        return False


def sent_samples(stream: Stream, laid: Laid, buffers: Sequence[Octets]) -> Samples:
    """What the payloads of a stream say, on its timeline. Raises MissingCodec."""
    packets = stream.packets
    types = packets.payload_type[laid.rows]
    present = np.flatnonzero(np.bincount(types, minlength=128)).tolist()
    sizes = packet_ticks(stream)[laid.rows] * laid.rate_hz // stream.clock_rate_hz
    total = min(span(laid.position, sizes), LONGEST_TIMELINE_S * laid.rate_hz)
    timeline = np.zeros(total, np.int16)
    for number in present:
        for buffer in np.unique(packets.buffer[laid.rows]):
            mine = (types == number) & (packets.buffer[laid.rows] == buffer)
            rows, place = laid.rows[mine], laid.position[mine]
            _lay_onto(timeline, stream.encodings[number].name, stream, rows, place, buffers[buffer])
    return timeline


def _lay_onto(
    timeline: Samples,
    encoding: str,
    stream: Stream,
    rows: NDArray[np.int64],
    place: NDArray[np.int64],
    octets: Octets,
) -> None:
    packets = stream.packets
    table = sample_table(encoding)
    if table is not None:
        start, length = packets.start[rows], packets.captured[rows]
        lay_by_table(table, octets, start, length, place, len(timeline), onto=timeline)
        return
    # Decoders that remember the past need the order of media time.
    order = np.argsort(place, kind="stable")
    rows, place = rows[order], place[order]
    payloads, offsets = gather(octets, packets.start[rows], packets.captured[rows])
    samples, ends = decode(encoding, payloads, offsets)
    laid = lay(samples, ends, place, len(timeline))
    held = laid != 0
    timeline[held] = laid[held]


def keep_time(samples: Samples, skew_ppm: float) -> Samples:
    """The samples at the capture's pace: single quiet samples dropped where the sender is fast, repeated where slow.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    skew_ppm : float
        Sender's clock against the capture's, NaN where unknown. [ppm]

    Returns
    -------
    int16 array
        Off by at most one sample from the capture's time at any place, and by as much again where the quiet sample is
        looked for.
    """
    count = 0 if np.isnan(skew_ppm) else round(abs(skew_ppm) * 1e-6 * len(samples))
    if count == 0:
        return samples
    spacing = len(samples) / count
    reach = max(1, min(int(spacing / 2), 400))
    centres = ((np.arange(count) + 0.5) * spacing).astype(np.int64)
    quiet = [
        first + int(np.argmin(np.abs(samples[first : first + 2 * reach].astype(np.int32))))
        for first in np.maximum(centres - reach, 0).tolist()
    ]
    return np.delete(samples, quiet) if skew_ppm > 0 else np.insert(samples, quiet, samples[quiet])


def _at_rate(samples: Samples, own_hz: int, wanted_hz: int) -> Samples:
    if own_hz == wanted_hz or len(samples) == 0:
        return samples
    from scipy.signal import resample_poly

    raised = resample_poly(samples.astype(np.float32), wanted_hz, own_hz)
    return np.asarray(np.clip(np.rint(raised), -32768, 32767), np.int16)
