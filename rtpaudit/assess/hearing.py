"""Streams at the audio bench: what the sound of each is like, and what is wrong with its payload."""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.playback import is_audio, packet_ticks
from rtpaudit.audio.clipping import Clipping, clipping_of
from rtpaudit.audio.digits import Digit, digits_of
from rtpaudit.audio.encryption import Cipher, CipherVerdict, cipher_of
from rtpaudit.audio.judged import judged_frames
from rtpaudit.audio.law import LawVerdict, law_of
from rtpaudit.audio.level import SpeechLevel, WindowLevels, level_of, noise_level_dbov, window_levels
from rtpaudit.audio.onsets import Onsets, onsets_of
from rtpaudit.audio.payload import Idle, Repetition, idle_of, repetition_of
from rtpaudit.audio.progress import ProgressTone, progress_tones
from rtpaudit.audio.robbed_bits import RobbedBits, robbed_bits_of
from rtpaudit.audio.scan import BLOCKS_PER_S, EXTREMES, LINEAR_EXTREMES, Scan, scan
from rtpaudit.audio.silence import Passage, dead_air
from rtpaudit.audio.slips import Slips, slips_of
from rtpaudit.audio.spectrum import Band, Hum, band_of, hum_of, spectra_of
from rtpaudit.audio.splices import Splices, splices_of
from rtpaudit.audio.tandem import Tandem, tandem_of
from rtpaudit.audio.tones import SteadyTone, steady_tones, tone_bursts
from rtpaudit.capture.frames import Octets
from rtpaudit.media.streams import Stream

Samples = NDArray[np.int16]
G711 = ("PCMU", "PCMA")
PAUSE_S = 0.2
"""in which nothing is sent, or digital silence, from which speech that follows begins anew"""
SILENT_PEAK = 8
"""of digital silence: A-law has no zero"""


@dataclass(slots=True)
class StreamSound:
    """What the sound of one stream is like; times are seconds of its timeline."""

    rate_hz: int
    origin_ns: int
    """capture time of its first sample"""
    scanned: Scan
    level: SpeechLevel
    noise_dbov: float
    windows: WindowLevels
    clipping: Clipping
    dead_air: list[Passage]
    hum: Hum | None
    band: Band
    digits: list[Digit]
    tones: list[ProgressTone]
    steady_tones: list[SteadyTone]
    law: LawVerdict | None
    """of G.711 alone"""
    slips: Slips | None
    splices: Splices | None
    tandem: Tandem | None = None
    onsets: Onsets | None = None
    """None where there are no pauses in which nothing was sent, or nothing but silence"""
    payload: "PayloadSigns" = field(default_factory=lambda: PayloadSigns())


@dataclass(frozen=True, slots=True)
class PayloadSigns:
    """What the payload octets of a stream show, whether or not they can be decoded."""

    cipher: CipherVerdict | None = None
    repetition: Repetition | None = None
    idle: Idle | None = None
    robbed_bits: RobbedBits | None = None

    @property
    def encrypted(self) -> bool:
        """Whether the payload has no structure at all."""
        return self.cipher is not None and self.cipher.cipher is Cipher.ENCRYPTED


def payload_signs(stream: Stream, buffers: Sequence[Octets]) -> PayloadSigns:
    """Signs in the octets of a stream's main payload type, of the buffer that holds most of it."""
    packets = stream.packets
    rows = np.flatnonzero((packets.payload_type == stream.payload_type) & is_audio(stream) & ~packets.duplicate)
    if not len(rows):
        return PayloadSigns()
    buffer = int(np.bincount(packets.buffer[rows]).argmax())
    rows = rows[packets.buffer[rows] == buffer]
    octets, start, length = buffers[buffer], packets.start[rows], packets.captured[rows]
    cipher = cipher_of(octets, start, length, stream.encoding)
    if cipher.cipher is Cipher.ENCRYPTED or stream.encrypted:
        return PayloadSigns(cipher)
    return PayloadSigns(
        cipher,
        repetition_of(octets, start, length, stream.encoding),
        idle_of(octets, start, length, stream.encoding),
        robbed_bits_of(octets, start, length, packets.media_ticks[rows], stream.encoding),
    )


def received_mask(
    stream: Stream, rows: NDArray[np.int64], position: NDArray[np.int64], rate_hz: int, total: int
) -> NDArray[np.bool_] | None:
    """Which samples of a timeline packets brought; None where all of them."""
    sizes = packet_ticks(stream)[rows] * rate_hz // stream.clock_rate_hz
    order = np.argsort(position, kind="stable")
    begin, reach = position[order], np.maximum.accumulate((position + sizes)[order])
    holes_from = np.concatenate([[0], reach])
    holes_to = np.append(begin, total)
    holes = np.flatnonzero(holes_to > holes_from)
    if not len(holes):
        return None
    mask = np.ones(total, np.bool_)
    for hole in holes.tolist():
        mask[max(holes_from[hole], 0) : holes_to[hole]] = False
    return mask


def begins_after_pauses(
    stream: Stream, rows: NDArray[np.int64], position: NDArray[np.int64], rate_hz: int
) -> NDArray[np.int64]:
    """First sample of each talkspurt that follows a pause of which no packet is missing. [samples]"""
    packets = stream.packets
    order = np.argsort(position, kind="stable")
    place, number = position[order], packets.extended[rows[order]]
    others = np.sort(packets.extended[~packets.duplicate & ~is_audio(stream)])
    between = np.diff(np.searchsorted(others, number))
    step = np.diff(place)
    usual = round(stream.packet_time_ms * rate_hz / 1000.0) if stream.packet_time_ms > 0 else 0
    paused = (step > usual + PAUSE_S * rate_hz) & (np.diff(number) == 1 + between)
    return np.asarray(place[1:][paused])


def begins_after_silence(samples: Samples, scanned: Scan) -> NDArray[np.int64]:
    """First sample of each talkspurt that follows digital silence in packets. [samples]"""
    silent = np.concatenate([[False], (scanned.received > 0) & (scanned.peak <= SILENT_PEAK), [False]])
    edges = np.flatnonzero(np.diff(silent.astype(np.int8)))
    lasts = edges[1::2] - edges[::2] >= PAUSE_S * BLOCKS_PER_S
    begins = edges[1::2][lasts] * scanned.block_samples
    begins = begins[begins + scanned.block_samples <= len(samples)]
    loud = np.abs(samples[begins[:, None] + np.arange(scanned.block_samples)].astype(np.int32)) > SILENT_PEAK
    return np.asarray(begins + loud.argmax(axis=1))


def hear(
    stream: Stream,
    samples: Samples,
    received: NDArray[np.bool_] | None,
    rate_hz: int,
    origin_ns: int,
    begins: NDArray[np.int64],
) -> StreamSound:
    """Measure the sound of one stream.

    Parameters
    ----------
    stream : Stream
    samples : int16 array, shape (n,)
        What its payloads say, on its timeline.
    received : bool array, shape (n,), optional
        False where no packet brought the sample.
    rate_hz : int
        [Hz]
    origin_ns : int
        Capture time of the first sample. [ns]
    begins : int64 array, shape (talkspurts,)
        As ``begins_after_pauses`` gives them. [samples]
    """
    scanned = scan(samples, rate_hz, received, stream.encoding)
    level = level_of(scanned)
    spectra, bursts = spectra_of(samples, scanned), tone_bursts(samples, scanned)
    low, high = EXTREMES.get(stream.encoding, LINEAR_EXTREMES)
    judged = judged_frames(samples, received)
    packet = round(stream.packet_time_ms * rate_hz / 1000.0) if stream.packet_time_ms > 0 else 0
    return StreamSound(
        rate_hz=rate_hz,
        origin_ns=origin_ns,
        scanned=scanned,
        level=level,
        noise_dbov=noise_level_dbov(scanned, level),
        windows=window_levels(scanned, level),
        clipping=clipping_of(samples, scanned, low, high),
        dead_air=dead_air(scanned),
        hum=hum_of(spectra),
        band=band_of(spectra),
        digits=digits_of(samples, scanned),
        tones=progress_tones(bursts),
        steady_tones=steady_tones(samples, scanned, bursts, stream.encoding),
        law=law_of(samples, rate_hz) if stream.encoding in G711 else None,
        slips=slips_of(samples, rate_hz, received, packet, judged),
        splices=splices_of(samples, rate_hz, packet, received, judged) if packet else None,
        tandem=tandem_of(samples, stream.encoding),
        onsets=onsets_of(samples, rate_hz, np.union1d(begins, begins_after_silence(samples, scanned)), level),
    )
