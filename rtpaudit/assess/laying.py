"""Payloads of a stream decoded and laid on its RTP timeline."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.long_sound import silence
from rtpaudit.assess.media_time import common_ticks
from rtpaudit.assess.playback import channels_of, packet_ticks
from rtpaudit.assess.restored import before_in_sequence
from rtpaudit.capture.frames import Octets
from rtpaudit.codecs import codec_of, decode, sample_table
from rtpaudit.errors import MissingCodec
from rtpaudit.media.streams import Content, Stream, StreamPackets
from rtpaudit.playout.timeline import gather, lay, lay_by_table, positions, span
from rtpaudit.signalling.payload_types import Encoding
from rtpaudit.units import NS_PER_S

Samples = NDArray[np.int16]

LONGEST_HOLD_NS = 30 * NS_PER_S
"""what a network may hold packets back; one that seems to come earlier than the others by more has a wrong time"""
FIRST_PACKETS = 16
"""by whose clock a stream begins, should the capture's be set later on"""
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
    recovered: NDArray[np.int64]
    """rows of the stream's recovered packets that carry audio"""
    recovered_position: NDArray[np.int64]


def silence_reason(stream: Stream) -> str:
    """Why a stream gives no audio, "" where it does."""
    if stream.media != "audio":
        return f"{stream.media} is not decoded"
    if stream.encrypted:
        return "encrypted"
    if stream.encoding == "unknown":
        number = stream.payload_type
        return (
            f"nothing tells what payload type {number} is; --payload-type {number}=NAME/CLOCK does, as in 96=G722/8000"
        )
    try:
        codec_of(stream.encoding)
    except MissingCodec as fault:
        return str(fault)
    return ""


def lay_out(stream: Stream, skew_ppm: float = float("nan")) -> Laid:
    """Where the audio packets of a stream lie on its timeline.

    ``skew_ppm`` is the sender's clock against the capture's, NaN where it is unknown: without it the clock of a fast
    sender, by the end of a long call, would put the origin too early.
    """
    packets = stream.packets
    rate = codec_of(stream.encoding).sampling_rate(stream.clock_rate_hz)
    fits = np.zeros(128, np.bool_)
    for number, encoding in stream.encodings.items():
        fits[number] = _decodes(encoding.name)
    chosen = fits[packets.payload_type] & (packets.content == Content.AUDIO) & ~packets.duplicate
    rows = np.flatnonzero(chosen)
    position = positions(
        common_ticks(stream)[rows], packets.time_ns[rows], stream.clock_rate_hz, rate, packets.segment[rows]
    )
    pace = rate * (1.0 + (0.0 if np.isnan(skew_ppm) else skew_ppm) * 1e-6)
    early = packets.time_ns[rows] - (position * (NS_PER_S / pace)).astype(np.int64)
    origin_ns = int(_sound(early).min()) if len(rows) else int(packets.time_ns[0])
    return Laid(rows, position, rate, origin_ns, *_lay_recovered(stream, rows, position, rate, fits))


def _sound(early: NDArray[np.int64]) -> NDArray[np.int64]:
    """Times of the origin by each packet, without those of a clock that was wrong for a moment, or set later on."""
    if np.ptp(early) <= LONGEST_HOLD_NS:
        return early
    return early[np.abs(early - np.median(early[:FIRST_PACKETS])) <= LONGEST_HOLD_NS]


def _lay_recovered(
    stream: Stream, rows: NDArray[np.int64], position: NDArray[np.int64], rate_hz: int, fits: NDArray[np.bool_]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Recovered packets that carry audio, and their places by the media time since the packet before them."""
    found = stream.recovered
    if found is None or not len(rows):
        return np.empty(0, np.int64), np.empty(0, np.int64)
    chosen = np.flatnonzero(fits[found.payload_type] & (found.content == Content.AUDIO))
    before = before_in_sequence(stream, rows)[chosen]
    ticks = found.media_ticks[chosen] - stream.packets.media_ticks[rows[before]]
    place = position[before] + ticks * rate_hz // stream.clock_rate_hz
    inside = place >= 0
    return chosen[inside], place[inside]


def _decodes(encoding: str) -> bool:
    try:
        codec_of(encoding)
    except MissingCodec:
        return False
    return True


def sent_samples(stream: Stream, laid: Laid, buffers: Sequence[Octets]) -> Samples:
    """What the payloads of a stream say, on its timeline. Raises MissingCodec.

    Payload types of another sampling rate than that of most packets are brought to it, the others stay as they are.
    """
    pieces = [_pieces(stream.packets, laid.rows, laid.position)]
    if stream.recovered is not None:
        pieces.append(_pieces(stream.recovered, laid.recovered, laid.recovered_position))
    types, buffer, start, length, place = (np.concatenate(columns) for columns in zip(*pieces, strict=True))
    sizes = packet_ticks(stream)[laid.rows] * laid.rate_hz // stream.clock_rate_hz
    total = min(span(laid.position, sizes), LONGEST_TIMELINE_S * laid.rate_hz)
    timeline = silence(total)
    for number in np.flatnonzero(np.bincount(types, minlength=128)).tolist():
        mine, encoding = types == number, stream.encodings[number]
        payloads = Payloads(buffers, buffer[mine], start[mine], length[mine])
        own_hz = codec_of(encoding.name).sampling_rate(encoding.clock_rate_hz)
        if own_hz == laid.rate_hz:
            _lay_onto(timeline, encoding, payloads, place[mine])
        else:
            line = silence(total * own_hz // laid.rate_hz)
            ends = _lay_onto(line, encoding, payloads, place[mine] * own_hz // laid.rate_hz)
            _bring_over(timeline, at_rate(line, own_hz, laid.rate_hz), place[mine], ends * laid.rate_hz // own_hz)
    return timeline


@dataclass(frozen=True, slots=True)
class Payloads:
    """Payloads of one encoding, wherever they lie. Columns of shape (n,)."""

    buffers: Sequence[Octets]
    buffer: NDArray[np.uint16]
    start: NDArray[np.int64]
    length: NDArray[np.int32]

    def gathered(self, order: NDArray[np.int64]) -> tuple[Octets, NDArray[np.int64]]:
        """Their octets one after the other, and where each begins."""
        buffer, start, length = self.buffer[order], self.start[order], self.length[order]
        edges = [0, *(np.flatnonzero(np.diff(buffer)) + 1).tolist(), len(buffer)]
        runs = [gather(self.buffers[buffer[a]], start[a:b], length[a:b]) for a, b in pairwise(edges)]
        held = np.concatenate([np.zeros(1, np.int64), *(np.diff(offsets) for _, offsets in runs)])
        return np.concatenate([octets for octets, _ in runs]), np.cumsum(held)


def _pieces(packets: StreamPackets, rows: NDArray[np.int64], position: NDArray[np.int64]) -> tuple[NDArray[Any], ...]:
    """Payload type, buffer, first octet, length and place of some packets."""
    return packets.payload_type[rows], packets.buffer[rows], packets.start[rows], packets.captured[rows], position


def _lay_onto(timeline: Samples, encoding: Encoding, payloads: Payloads, place: NDArray[np.int64]) -> NDArray[np.int64]:
    """Lay what payloads of one encoding say onto the timeline at its own rate; samples that each of them holds."""
    table, channels = sample_table(encoding.name), channels_of(encoding)
    if table is not None and channels == 1:
        for number in np.unique(payloads.buffer).tolist():
            mine = payloads.buffer == number
            octets, start, length = payloads.buffers[number], payloads.start[mine], payloads.length[mine]
            lay_by_table(table, octets, start, length, place[mine], len(timeline), onto=timeline)
        return payloads.length.astype(np.int64)
    # Decoders that remember the past need the order of media time, also from one file of a ring to the next.
    order = np.argsort(place, kind="stable")
    samples, ends = decode(encoding.name, *payloads.gathered(order))
    if channels > 1:
        samples, ends = _mixed(samples, ends, channels)
    lay(samples, ends, place[order], len(timeline), onto=timeline)
    held = np.empty(len(order), np.int64)
    held[order] = np.diff(ends)
    return held


def _bring_over(timeline: Samples, other: Samples, place: NDArray[np.int64], held: NDArray[np.int64]) -> None:
    """Take the stretches of some packets from another timeline: its filter rings on into their neighbours."""
    length = min(len(timeline), len(other))
    edges = np.zeros(length + 1, np.int32)
    np.add.at(edges, np.clip(place, 0, length), 1)
    np.add.at(edges, np.clip(place + held, 0, length), -1)
    mine = np.cumsum(edges[:-1]) > 0
    timeline[:length][mine] = other[:length][mine]


def at_rate(samples: Samples, own_hz: int, wanted_hz: int) -> Samples:
    """The same sound at another sampling rate."""
    if own_hz == wanted_hz or len(samples) == 0:
        return samples
    from scipy.signal import resample_poly

    raised = resample_poly(samples.astype(np.float32), wanted_hz, own_hz)
    return np.asarray(np.clip(np.rint(raised), -32768, 32767), np.int16)


def _mixed(samples: Samples, ends: NDArray[np.int64], channels: int) -> tuple[Samples, NDArray[np.int64]]:
    """The mean of all channels; what is left of an instant at the end of a packet goes."""
    instants = np.diff(ends) // channels
    within = np.arange(len(samples)) - np.repeat(ends[:-1], np.diff(ends))
    whole = within < np.repeat(instants * channels, np.diff(ends))
    mean = samples[whole].reshape(-1, channels).mean(axis=1, dtype=np.float64)
    return np.rint(mean).astype(np.int16), np.concatenate([np.zeros(1, np.int64), np.cumsum(instants)])
