"""What playout and each measure of sound cost: ``python -m tests.benchmarks.sound [MINUTES]``.

Nothing here is asserted. The target is 2 s of one core for an hour of two-way audio, playout and all measures together.
The call is made of two voices that speak in turn over faint noise, one of them heard again as an echo; packets of 20 ms
are lost and delayed by chance. Times are the best of three, and of one direction unless said otherwise.
"""

import sys
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import soundfile
from numpy.typing import NDArray

from rtpaudit.audio.clipping import clipping_of
from rtpaudit.audio.digits import digits_of
from rtpaudit.audio.echo import echo_of
from rtpaudit.audio.encryption import cipher_of
from rtpaudit.audio.law import law_of
from rtpaudit.audio.level import level_of, noise_level_dbov, window_levels
from rtpaudit.audio.payload import idle_of, repetition_of
from rtpaudit.audio.progress import progress_tones
from rtpaudit.audio.robbed_bits import robbed_bits_of
from rtpaudit.audio.scan import scan
from rtpaudit.audio.silence import dead_air, dead_air_together
from rtpaudit.audio.slips import slips_of
from rtpaudit.audio.spectrum import band_of, hum_of, spectra_of
from rtpaudit.audio.splices import splices_of
from rtpaudit.audio.tones import steady_tones, tone_bursts
from rtpaudit.codecs.g711 import decode_pcmu, encode_pcmu
from rtpaudit.playout.buffer import play, talkspurts
from rtpaudit.playout.heard import heard, lost_stretches
from rtpaudit.playout.what_if import what_if
from rtpaudit.profile import Playout

AUDIO = Path(__file__).parents[2] / "fixtures" / "audio"
RATE_HZ, PACKET = 8000, 160
TURN_S, PAUSE_S = 5, 6
ECHO_SAMPLES, ECHO_GAIN = 1600, 0.03
TARGET_S = 2.0

Samples = NDArray[np.int16]


@dataclass(frozen=True)
class Direction:
    """One direction at the benches."""

    samples: Samples
    octets: NDArray[np.uint8]
    start: NDArray[np.int64]
    length: NDArray[np.int32]
    ticks: NDArray[np.int64]
    sequence: NDArray[np.int64]
    segment: NDArray[np.int32]
    time_ns: NDArray[np.int64]
    received: NDArray[np.bool_]


def call(minutes: float) -> tuple[Direction, Direction]:
    """Both directions of a call of so many minutes."""
    count = int(minutes * 60) * RATE_HZ
    draw = np.random.default_rng(1)
    sides = [draw.normal(0.0, 10.0, count).astype(np.float32) for _ in range(2)]
    turn = (TURN_S + PAUSE_S) * RATE_HZ
    for side, (name, line) in enumerate(zip(("desk.wav", "guest.wav"), sides, strict=True)):
        voice = soundfile.read(AUDIO / name, dtype="int16")[0]
        for begin in range(side * turn // 2, count - turn, turn):
            line[begin : begin + TURN_S * RATE_HZ] += voice[: TURN_S * RATE_HZ]
    sides[1][ECHO_SAMPLES:] += ECHO_GAIN * sides[0][:-ECHO_SAMPLES]
    first, second = (_direction(np.rint(line).astype(np.int16), draw) for line in sides)
    return first, second


def _direction(samples: Samples, draw: np.random.Generator) -> Direction:
    octets = encode_pcmu(samples)
    kept = np.flatnonzero(draw.random(len(octets) // PACKET) > 0.005)
    delay_ns = draw.gamma(2.0, 8e6, len(kept)).astype(np.int64)
    received = np.zeros(len(octets), np.bool_)
    received[(kept[:, None] * PACKET + np.arange(PACKET)).ravel()] = True
    laid = np.where(received, np.asarray(decode_pcmu(octets)), np.int16(0))
    return Direction(
        laid,
        octets,
        kept * PACKET,
        np.full(len(kept), PACKET, np.int32),
        kept * PACKET,
        kept.astype(np.int64),
        np.zeros(len(kept), np.int32),
        kept * 20_000_000 + delay_ns,
        received,
    )


def playout_of(one: Direction) -> dict[str, Callable[[], Any]]:
    """What is simulated of the receiver."""
    sizes = np.full(len(one.ticks), PACKET, np.int64)
    spurt = talkspurts(one.sequence, one.segment, one.ticks, sizes, RATE_HZ // 5)
    played = {kind: play(one.time_ns, one.ticks, spurt, RATE_HZ, Playout(kind=kind)) for kind in ("fixed", "adaptive")}
    in_time = played["fixed"].played

    def concealed() -> Samples:
        return heard(one.samples, lost_stretches(one.ticks, sizes, one.sequence, one.segment, in_time), True)

    return {
        "talkspurts": lambda: talkspurts(one.sequence, one.segment, one.ticks, sizes, RATE_HZ // 5),
        "playout, fixed": lambda: play(one.time_ns, one.ticks, spurt, RATE_HZ, Playout()),
        "playout, adaptive": lambda: play(one.time_ns, one.ticks, spurt, RATE_HZ, Playout(kind="adaptive")),
        "other buffers": lambda: what_if(played["fixed"].required_ns, one.sequence, one.segment),
        "concealment": concealed,
    }


def measures_of(one: Direction) -> dict[str, Callable[[], Any]]:
    """What is measured of one direction."""
    scanned = scan(one.samples, RATE_HZ, one.received, "PCMU")
    level, spectra, bursts = level_of(scanned), spectra_of(one.samples, scanned), tone_bursts(one.samples, scanned)
    payload = (one.octets, one.start, one.length)
    return {
        "scan": lambda: scan(one.samples, RATE_HZ, one.received, "PCMU"),
        "level": lambda: level_of(scanned),
        "noise": lambda: noise_level_dbov(scanned, level),
        "windows": lambda: window_levels(scanned, level),
        "clipping": lambda: clipping_of(one.samples, scanned, -32124, 32124),
        "dead air": lambda: dead_air(scanned),
        "spectra": lambda: spectra_of(one.samples, scanned),
        "hum and band": lambda: (hum_of(spectra), band_of(spectra)),
        "digits": lambda: digits_of(one.samples, scanned),
        "tone bursts": lambda: tone_bursts(one.samples, scanned),
        "call-progress tones": lambda: progress_tones(bursts),
        "steady tones": lambda: steady_tones(one.samples, scanned, bursts, "PCMU"),
        "law": lambda: law_of(one.samples, RATE_HZ),
        "slips": lambda: slips_of(one.samples, RATE_HZ, one.received, PACKET),
        "splices": lambda: splices_of(one.samples, RATE_HZ, PACKET, one.received),
        "encryption": lambda: cipher_of(*payload, "PCMU"),
        "repetition": lambda: repetition_of(*payload, "PCMU"),
        "idle code": lambda: idle_of(*payload, "PCMU"),
        "robbed bits": lambda: robbed_bits_of(*payload, one.ticks, "PCMU"),
    }


def measures_of_both(one: Direction, other: Direction) -> dict[str, Callable[[], Any]]:
    """What only both directions together tell."""
    scans = [scan(each.samples, RATE_HZ, each.received, "PCMU") for each in (one, other)]
    return {
        "echo, both ways": lambda: [echo_of(*pair, RATE_HZ) for pair in _both_ways(one.samples, other.samples)],
        "common dead air": lambda: dead_air_together(scans[0], scans[1], 0.0),
    }


def _both_ways(one: Samples, other: Samples) -> list[tuple[Samples, Samples]]:
    return [(one, other), (other, one)]


def seconds(job: Callable[[], Any]) -> float:
    """The best of three, after one that compiles. [s]"""
    job()
    taken = []
    for _ in range(3):
        begun = time.process_time()
        job()
        taken.append(time.process_time() - begun)
    return min(taken)


def main(minutes: float) -> None:
    """Print the cost of each measure, for one sample and for an hour of two-way audio."""
    one, other = call(minutes)
    hours, whole = minutes / 60.0, 0.0
    print(f"{minutes:g} min of two-way audio, {len(one.samples):,} samples a direction")
    print(f"{'':24}{'ns/sample':>10}{'s/hour both ways':>18}")
    parts = [(playout_of(one), 2), (measures_of(one), 2), (measures_of_both(one, other), 1)]
    for jobs, directions in parts:
        for name, job in jobs.items():
            taken = seconds(job)
            an_hour = taken * directions / hours
            # Only one kind of buffer is simulated in a run; other buffers are worked out where somebody looks at them.
            whole += 0.0 if name in ("playout, adaptive", "other buffers") else an_hour
            print(f"{name:24}{1e9 * taken / len(one.samples):10.2f}{an_hour:18.3f}")
    print(f"{'all but adaptive and other buffers':34}{whole:18.3f}   target {TARGET_S:g}")


if __name__ == "__main__":
    main(float(sys.argv[1]) if len(sys.argv) > 1 else 60.0)
