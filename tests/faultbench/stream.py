"""One direction of a call: sound into packets, packets onto the way, and what arrives where and when."""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.codecs.g711 import encode_pcma, encode_pcmu
from tests.faultbench.voices import Sound, to_16_bit

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]


@dataclass
class Packets:
    """Packets of one direction, one after the other as the sender counts them. Columns of shape (n,)."""

    sent_s: Floats
    sequence: Integers
    """counted from 0; the first number of the stream comes on top"""
    ticks: Integers
    """likewise"""
    payload: list[bytes]
    payload_type: Integers
    marker: Mask
    ssrc: Integers
    dscp: Integers
    ttl: Integers
    at_s: Floats
    """at the capture point"""
    lost: Mask
    """before the capture point"""
    lost_after: Mask
    copies: list[tuple[int, float]] = field(default_factory=list)
    """packet and the seconds after which it passes again"""

    def __len__(self) -> int:
        return len(self.sent_s)


SoundFault = Callable[[Sound, int], Sound]
PacketFault = Callable[["Packets"], None]


@dataclass
class Leg:
    """One direction as it is planned."""

    source: tuple[str, int]
    destination: tuple[str, int]
    encoding: str = "PCMU"
    payload_type: int = 0
    clock_hz: int = 8000
    sampling_hz: int = 8000
    packet_ms: int = 20
    ssrc: int = 1
    first_sequence: int = 0
    first_ticks: int = 0
    skew_ppm: float = 0.0
    dscp: int = 46
    ttl: int = 64
    identification: str = "count"
    """count, random or zero"""
    suppression: str = ""
    """of silence: "", pauses, or noise (RFC 3389)"""
    before_s: float = 0.01
    """network delay from the sender to the capture point"""
    after_s: float = 0.01
    jitter_s: float = 0.0003
    level_dbov: float = -26.0
    noise_dbov: float = -66.0
    begins_s: float = 0.0
    """after the answer"""
    ends_s: float = 1e9
    sound: list[SoundFault] = field(default_factory=list)
    sender: list[PacketFault] = field(default_factory=list)
    way: list[PacketFault] = field(default_factory=list)
    """between sender and capture point"""
    after: list[PacketFault] = field(default_factory=list)
    """between capture point and receiver"""
    encoded_as: str = ""
    """law of the payload, where it is not what the payload type says"""

    @property
    def step_ticks(self) -> int:
        """Ticks of one packet."""
        return self.clock_hz * self.packet_ms // 1000


COMFORT_NOISE = 13
STATIC = {"PCMU": 0, "PCMA": 8, "G722": 9}


def encoded(encoding: str, sound: Sound, rate: int) -> bytes:
    """A whole direction as octets of an encoding with a fixed number of octets a sample."""
    samples = to_16_bit(sound)
    if encoding == "PCMU":
        return encode_pcmu(samples).tobytes()
    if encoding == "PCMA":
        return encode_pcma(samples).tobytes()
    if encoding == "L16":
        return samples.astype(">i2").tobytes()
    if encoding == "G722":
        return _g722(samples)
    raise ValueError(encoding)


def _g722(samples: NDArray[np.int16]) -> bytes:
    import av

    coder = av.CodecContext.create("g722", "w")
    coder.sample_rate, coder.layout, coder.format = 16000, "mono", "s16"
    octets = []
    for first in range(0, len(samples) - 319, 320):
        frame = av.AudioFrame.from_ndarray(samples[None, first : first + 320], format="s16", layout="mono")
        frame.sample_rate, frame.pts = 16000, first
        octets += [bytes(one) for one in coder.encode(frame)]
    return b"".join(octets)


def packets_of(leg: Leg, sound: Sound, draw: np.random.Generator) -> Packets:
    """The packets that a sender makes of its sound, with its suppression of silence and its own clock."""
    for fault in leg.sound:
        sound = fault(sound, leg.sampling_hz)
    octets = encoded(leg.encoded_as or leg.encoding, sound, leg.sampling_hz)
    per_packet = leg.sampling_hz * leg.packet_ms // 1000
    size = {"L16": 2 * per_packet, "G722": per_packet // 2}.get(leg.encoding, per_packet)
    count = len(octets) // size
    frame = np.arange(count)
    payload = [octets[k * size : (k + 1) * size] for k in range(count)]
    sends, first, noise = _suppressed(leg, sound, per_packet, count)
    kept = frame[sends]
    at = kept * leg.packet_ms / 1000 / (1 + leg.skew_ppm * 1e-6) + leg.begins_s
    inside = at < min(leg.ends_s, len(sound) / leg.sampling_hz)
    kept, at = kept[inside], at[inside]
    n = len(kept)
    noise_octet = bytes([int(min(127, max(0, -leg.noise_dbov)))])
    packets = Packets(
        sent_s=at + np.abs(draw.normal(0, 0.0001, n)),
        sequence=np.arange(n),
        ticks=kept * leg.step_ticks,
        payload=[noise_octet if noise[k] else payload[k] for k in kept.tolist()],
        payload_type=np.where(noise[kept], COMFORT_NOISE, leg.payload_type),
        marker=first[kept],
        ssrc=np.full(n, leg.ssrc),
        dscp=np.full(n, leg.dscp),
        ttl=np.full(n, leg.ttl),
        at_s=np.zeros(n),
        lost=np.zeros(n, bool),
        lost_after=np.zeros(n, bool),
    )
    for act in leg.sender:
        act(packets)
    return packets


def _suppressed(leg: Leg, sound: Sound, per_packet: int, count: int) -> tuple[Mask, Mask, Mask]:
    """Which frames are sent, which begin a talkspurt, which are comfort noise."""
    everything = np.ones(count, bool)
    begins = np.zeros(count, bool)
    begins[:1] = True
    if not leg.suppression:
        return everything, begins, ~everything
    power = (sound[: count * per_packet].reshape(count, per_packet) ** 2).mean(axis=1)
    speech = power > 10 ** ((max(leg.noise_dbov + 8, leg.level_dbov - 30)) / 10)
    # Two frames before speech are sent as well, and what follows it within a fifth of a second.
    held = np.convolve(speech, np.ones(1 + 200 // leg.packet_ms), "full")[:count] > 0
    ahead = 1 + 30 // leg.packet_ms
    held |= np.convolve(speech[::-1], np.ones(1 + ahead), "full")[:count][::-1] > 0
    starts = held & ~np.concatenate([[False], held[:-1]])
    if leg.suppression == "pauses":
        return held, starts, ~everything
    ends = ~held & np.concatenate([[True], held[:-1]])
    return held | ends, starts, ends


def travel(leg: Leg, packets: Packets, draw: np.random.Generator) -> None:
    """Carry packets to the capture point: a quiet network in order, then what is wrong with it."""
    n = len(packets)
    delay = leg.before_s + draw.gamma(2.0, leg.jitter_s / 2, n)
    packets.at_s = np.maximum.accumulate(packets.sent_s + delay) if n else packets.sent_s.copy()
    for act in leg.way:
        act(packets)
    for act in leg.after:
        act(packets)
