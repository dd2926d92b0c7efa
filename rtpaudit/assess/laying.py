"""Payloads of a stream decoded and laid on its RTP timeline."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.media_time import common_ticks
from rtpaudit.assess.playback import packet_ticks
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
        common_ticks(stream)[rows], packets.time_ns[rows], stream.clock_rate_hz, rate, packets.segment[rows]
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
