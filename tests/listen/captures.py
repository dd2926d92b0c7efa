"""Captures of one call whose faults are put where a test wants them."""

from collections.abc import Sequence
from pathlib import Path

import numpy as np
import soundfile
from numpy.typing import NDArray

from rtpaudit.codecs.g711 import encode_pcmu
from tests.craft import START_NS, ethernet, ipv4, pcap, rtp, udp

AUDIO = Path(__file__).parents[2] / "fixtures" / "audio"
RATE_HZ, PACKET = 8000, 160
CALLER, CALLEE = ("192.0.2.10", 4000), ("198.51.100.20", 5000)
LATE_NS = 150_000_000

Samples = NDArray[np.int16]
Stretches = Sequence[tuple[float, float]]


def voice(seconds: float, name: str = "desk", gap_s: float = 1.0) -> Samples:
    """A voice that speaks again and again, with a second of faint noise between."""
    spoken = soundfile.read(AUDIO / f"{name}.wav", dtype="int16")[0]
    noise = np.random.default_rng(1).normal(0.0, 10.0, int(gap_s * RATE_HZ)).astype(np.int16)
    turn = np.concatenate([spoken, noise])
    return np.tile(turn, int(seconds * RATE_HZ / len(turn)) + 1)[: int(seconds * RATE_HZ)]


def tone(seconds: float, frequency_hz: float, amplitude: float) -> Samples:
    """A sine."""
    at = np.arange(int(seconds * RATE_HZ)) / RATE_HZ
    return np.rint(amplitude * np.sin(2.0 * np.pi * frequency_hz * at)).astype(np.int16)


def dial(keys: str, seconds: float = 0.12, amplitude: float = 4000.0) -> Samples:
    """Keys pressed, as tones with pauses between (ITU-T Q.23, from memory)."""
    rows, columns = (697, 770, 852, 941), (1209, 1336, 1477, 1633)
    parts = []
    for key in keys:
        place = "123A456B789C*0#D".index(key)
        low, high = (tone(seconds, hz, amplitude) for hz in (rows[place // 4], columns[place % 4]))
        parts += [low + high, np.zeros(len(low), np.int16)]
    return np.concatenate(parts)


def capture(caller: Samples, callee: Samples, lost: Stretches = (), late: Stretches = ()) -> bytes:
    """A call without signalling; losses and late packets are those of the caller, in seconds of its speech."""
    packets = [*_packets(caller, CALLER, CALLEE, 1, lost, late), *_packets(callee, CALLEE, CALLER, 2, (), ())]
    packets.sort(key=lambda one: one[0])
    return pcap([frame for _, frame in packets], [at for at, _ in packets])


def _packets(
    samples: Samples, source: tuple[str, int], destination: tuple[str, int], ssrc: int, lost: Stretches, late: Stretches
) -> list[tuple[int, bytes]]:
    octets, found = encode_pcmu(samples).tobytes(), []
    for k in range(len(octets) // PACKET):
        second = k * 0.02
        if any(begin <= second < end for begin, end in lost):
            continue
        behind = LATE_NS if any(begin <= second < end for begin, end in late) else 0
        packet = rtp(octets[k * PACKET : (k + 1) * PACKET], 1000 + k, k * PACKET, ssrc, marker=k == 0)
        frame = ethernet(ipv4(udp(packet, source[1], destination[1]), source[0], destination[0]))
        found.append((START_NS + k * 20_000_000 + behind, frame))
    return found
