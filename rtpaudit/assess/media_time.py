"""Media time of a stream's packets, whose payload types may each have a clock of their own."""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.media.streams import Content, Stream
from rtpaudit.units import NS_PER_S


def clock_rates(stream: Stream) -> NDArray[np.int32] | int:
    """Clock rate of every packet, one number where all payload types share it. [Hz]"""
    rates = {encoding.clock_rate_hz for encoding in stream.encodings.values()}
    if len(rates) <= 1:
        return stream.clock_rate_hz
    table = np.zeros(128, np.int32)
    for number, encoding in stream.encodings.items():
        table[number] = encoding.clock_rate_hz
    return np.asarray(table[stream.packets.payload_type], np.int32)


def common_ticks(stream: Stream) -> NDArray[np.int64]:
    """Unwrapped timestamps of all packets as if every one was counted by the stream's main clock. [ticks]

    From an audio packet of one clock to the next of another the arrivals tell how much time passed: their timestamps
    have no common origin. Events and comfort noise count by the clock of the audio before them.
    """
    packets = stream.packets
    audio = (packets.content != Content.EVENT) & (packets.content != Content.COMFORT_NOISE) & ~packets.duplicate
    rows = np.flatnonzero(audio)
    rates = clock_rates(stream)
    if isinstance(rates, int) or not len(rows) or (rates[rows] == stream.clock_rate_hz).all():
        return packets.media_ticks
    scale = stream.clock_rate_hz / np.maximum(rates[rows], 1)
    moved = np.diff(packets.media_ticks[rows]) * scale[1:]
    passed = np.diff(packets.time_ns[rows]) * (stream.clock_rate_hz / NS_PER_S)
    ticks = np.concatenate([[0.0], np.cumsum(np.where(np.diff(scale) == 0, moved, passed))])
    before = np.maximum(np.cumsum(audio) - 1, 0)
    since = packets.media_ticks - packets.media_ticks[rows][before]
    return np.asarray(np.rint(ticks[before] + since * scale[before]), np.int64)
