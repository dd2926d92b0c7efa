"""What came out of the earpiece: the sent timeline after the playout buffer, concealment and comfort noise."""

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.media_time import common_ticks
from rtpaudit.assess.playback import Playback, packet_ticks
from rtpaudit.assess.restored import before_in_sequence
from rtpaudit.capture.frames import Octets
from rtpaudit.codecs.comfort_noise import ComfortNoise, generate
from rtpaudit.errors import MalformedPacket
from rtpaudit.media.streams import Content, Stream
from rtpaudit.playout.heard import Stretches, heard, lost_stretches, noise_stretches
from rtpaudit.playout.timeline import positions

Samples = NDArray[np.int16]

NOISE_AT_ONCE = 1 << 20
CONCEALED = ("PCMU", "PCMA")
"""encodings whose losses ITU-T G.711 Appendix I conceals; the others are silent where packets are missing"""


def heard_samples(
    stream: Stream,
    playback: Playback | None,
    sent: Samples,
    rows: NDArray[np.int64],
    position: NDArray[np.int64],
    rate_hz: int,
    buffers: Sequence[Octets],
    conceals_loss: bool,
) -> Samples:
    """The sent timeline with lost and late packets concealed, or silent, and comfort noise in its pauses.

    Parameters
    ----------
    stream : Stream
    playback : Playback or None
        None where every packet is in time.
    sent : int16 array, shape (n,)
        It is written to: a call of hours has no room for two.
    rows, position : int64 arrays, shape (audio packets,)
        As ``Laid`` has them.
    rate_hz : int
        Sampling rate of ``sent``. [Hz]
    buffers : sequence of uint8 arrays
        Of the stream's recording.
    conceals_loss : bool
        Whether the receiver conceals.

    Returns
    -------
    int16 array, shape (n,)
        ``sent`` itself.
    """
    packets = stream.packets
    distinct = np.flatnonzero(~packets.duplicate)
    place = _places(stream, distinct, rows, position, rate_hz)
    sounding = np.isin(distinct, rows, assume_unique=True)
    sizes = np.where(sounding, packet_ticks(stream)[distinct] * rate_hz // stream.clock_rate_hz, 0)
    played = np.ones(len(packets), np.bool_)
    if playback is not None:
        played[playback.discarded] = False
    sequence, segment = packets.extended[distinct], packets.segment[distinct]
    lost = _stretches(stream, playback, place, sizes, distinct, played[distinct], rate_hz)
    made = heard(sent, lost, conceals_loss and stream.encoding in CONCEALED and rate_hz == 8000, in_place=True)
    noise = packets.content[distinct] == Content.COMFORT_NOISE
    if noise.any():
        begin, end = noise_stretches(place, sequence, segment, noise, len(sent))
        order = np.lexsort((sequence[noise], segment[noise]))
        _fill_with_noise(made, _noises(stream, distinct[noise][order], buffers), begin, end)
    return made


def _stretches(
    stream: Stream,
    playback: Playback | None,
    place: NDArray[np.int64],
    sizes: NDArray[np.int64],
    distinct: NDArray[np.int64],
    played: NDArray[np.bool_],
    rate_hz: int,
) -> Stretches:
    """Stretches that nothing came in time for, recovered packets taken into account."""
    packets, found = stream.packets, stream.recovered
    sequence, segment = packets.extended[distinct], packets.segment[distinct]
    if found is None:
        return lost_stretches(place, sizes, sequence, segment, played)
    before = before_in_sequence(stream, distinct)
    ticks = found.media_ticks - packets.media_ticks[distinct[before]]
    restored = playback.restored if playback is not None else None
    in_time = restored.in_time if restored is not None else np.ones(len(found), np.bool_)
    lengths = packet_ticks(stream, found) * rate_hz // stream.clock_rate_hz
    return lost_stretches(
        np.concatenate([place, place[before] + ticks * rate_hz // stream.clock_rate_hz]),
        np.concatenate([sizes, np.where(found.content == Content.AUDIO, lengths, 0)]),
        np.concatenate([sequence, found.extended]),
        np.concatenate([segment, found.segment]),
        np.concatenate([played, in_time]),
    )


def _places(
    stream: Stream, distinct: NDArray[np.int64], rows: NDArray[np.int64], position: NDArray[np.int64], rate_hz: int
) -> NDArray[np.int64]:
    """Place of every distinct packet, audio or not, on the timeline of the audio packets."""
    packets = stream.packets
    if len(distinct) == len(rows):
        return position
    place = positions(
        common_ticks(stream)[distinct],
        packets.time_ns[distinct],
        stream.clock_rate_hz,
        rate_hz,
        packets.segment[distinct],
    )
    among = np.searchsorted(distinct, rows)
    place = place - place[among[0]] + position[0] if len(rows) else place
    # An event whose timestamp stands still for long may have moved what follows it; audio stays where it was laid.
    place[among] = position
    return place


def _noises(stream: Stream, rows: NDArray[np.int64], buffers: Sequence[Octets]) -> list[ComfortNoise]:
    packets = stream.packets
    noises = []
    for row in rows.tolist():
        start = int(packets.start[row])
        octets = buffers[packets.buffer[row]][start : start + int(packets.captured[row])].tobytes()
        try:
            noises.append(ComfortNoise.parse(octets))
        except MalformedPacket:
            noises.append(ComfortNoise(-127.0))
    return noises


def _fill_with_noise(
    made: Samples, noises: list[ComfortNoise], begin: NDArray[np.int64], end: NDArray[np.int64]
) -> None:
    """Comfort noise in its stretches, so much of it at a time as needs little memory."""
    stretches = zip(noises, begin.tolist(), end.tolist(), strict=True)
    pieces = [
        (noise, at, min(at + NOISE_AT_ONCE, last))
        for noise, first, last in stretches
        for at in range(first, last, NOISE_AT_ONCE)
    ]
    sizes = np.array([last - first for _, first, last in pieces], np.int64)
    turn = (np.cumsum(sizes) - sizes) // NOISE_AT_ONCE
    first_of_turn = np.unique(turn, return_index=True)[1].tolist()
    for seed, (begins, ends) in enumerate(pairwise([*first_of_turn, len(pieces)])):
        now = pieces[begins:ends]
        counts = np.array([last - first for _, first, last in now], np.int64)
        parts = np.split(generate([noise for noise, _, _ in now], counts, seed), np.cumsum(counts)[:-1])
        for (_, first, last), part in zip(now, parts, strict=True):
            made[first:last] = part
