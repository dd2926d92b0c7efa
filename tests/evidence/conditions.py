"""Conditions of packet loss laid on real speech, sent through the whole audit, and judged twice.

Once by the audit's own prediction, once by PESQ (ITU-T P.862 with the mapping of P.862.1), which compares the sound as
it was spoken with the sound as it was heard. PESQ cannot hear delay, so the prediction is made without any.
"""

import itertools
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import soundfile
from numpy.typing import NDArray

import rtpaudit
from rtpaudit.codecs.g711 import encode_pcmu
from rtpaudit.profile import PlanningValues, Profile
from tests.craft import START_NS, ethernet, ipv4, pcap, rtp, udp

SPEECH = Path(__file__).parents[2] / "fixtures" / "audio" / "reader.wav"
RATE_HZ = 8000
WITHOUT_DELAY = PlanningValues(Ta=0.0, T=0.0, Tr=0.0)
TOO_LATE_NS = 150_000_000
"""well behind the 60 ms of the default playout buffer"""

RATES_PCT = (1.0, 2.0, 3.0, 5.0, 8.0, 10.0, 15.0, 20.0)
PACKET_TIMES_MS = (10, 20)
PATTERNS = {"random": 1.0, "bursts of ratio 2": 2.0, "bursts of ratio 4": 4.0, "random, too late": 1.0}
"""burst ratio of each; what is too late arrives, and cannot be played any more"""
NONE = "none"

Samples = NDArray[np.int16]


@dataclass(frozen=True, slots=True)
class Condition:
    """How much is missing, and how."""

    pattern: str
    packet_ms: int
    loss_pct: float
    conceals: bool = True


@dataclass(frozen=True, slots=True)
class Judged:
    """A condition with its two judgements, each the mean over several draws."""

    condition: Condition
    missing_pct: float
    """lost and too late, as the audit counted them"""
    predicted: float
    pesq: float
    spread: float
    """standard deviation of PESQ from draw to draw"""

    @property
    def error(self) -> float:
        """By how much the prediction is above PESQ. [MOS]"""
        return self.predicted - self.pesq


def conditions(
    patterns: Iterable[str] = PATTERNS, rates_pct: Sequence[float] = RATES_PCT, conceals: bool = True
) -> Iterator[Condition]:
    """All conditions: without any loss, then pattern by pattern."""
    for packet_ms in PACKET_TIMES_MS:
        yield Condition(NONE, packet_ms, 0.0, conceals)
    for pattern, packet_ms, rate in itertools.product(patterns, PACKET_TIMES_MS, rates_pct):
        yield Condition(pattern, packet_ms, rate, conceals)


def judge(condition: Condition, draws: int, place: Path) -> Judged:
    """Judge a condition; without loss one draw is all."""
    speech = soundfile.read(SPEECH, dtype="int16")[0]
    heard = [_once(condition, speech, draw, place) for draw in range(draws if condition.loss_pct else 1)]
    missing, predicted, scores = np.array(heard).T
    return Judged(
        condition, float(missing.mean()), float(predicted.mean()), float(scores.mean()), float(np.std(scores))
    )


def correlation(judged: Sequence[Judged]) -> float:
    """Pearson's correlation of prediction and PESQ over conditions."""
    return float(np.corrcoef([one.predicted for one in judged], [one.pesq for one in judged])[0, 1])


def root_mean_square_error(judged: Sequence[Judged]) -> float:
    """Of the prediction against PESQ, without any mapping. [MOS]"""
    return float(np.sqrt(np.mean([one.error**2 for one in judged])))


def missing_packets(count: int, share: float, burst_ratio: float, draw: np.random.Generator) -> NDArray[np.bool_]:
    """Which packets are missing, by a chain of two states whose runs are ``burst_ratio`` times as long as by chance.

    The first and the last packet stay, so that the stream keeps its length.
    """
    missing = np.zeros(count, np.bool_)
    if share > 0.0:
        # By chance runs of missing packets have a mean of 1 / (1 - share). ITU-T G.107 (06/2015), 7.5.
        ends = (1.0 - share) / burst_ratio
        begins = ends * share / (1.0 - share)
        for k in range(1, count - 1):
            missing[k] = draw.random() >= ends if missing[k - 1] else draw.random() < begins
    return missing


def capture(speech: Samples, condition: Condition, draw: np.random.Generator) -> bytes:
    """A capture of one PCMU stream that lost packets, or whose packets came too late."""
    octets = encode_pcmu(speech).tobytes()
    size = condition.packet_ms * RATE_HZ // 1000
    count = len(octets) // size
    missing = missing_packets(count, condition.loss_pct / 100.0, PATTERNS.get(condition.pattern, 1.0), draw)
    late = condition.pattern.endswith("too late")
    packets = []
    for k in range(count):
        if missing[k] and not late:
            continue
        octets_of_one = octets[k * size : (k + 1) * size]
        packet = rtp(octets_of_one, sequence=1000 + k, timestamp=k * size, ssrc=0x5EEC4, marker=k == 0)
        at = START_NS + k * condition.packet_ms * 1_000_000 + (TOO_LATE_NS if missing[k] else 0)
        packets.append((at, ethernet(ipv4(udp(packet)))))
    packets.sort(key=lambda one: one[0])
    return pcap([frame for _, frame in packets], [at for at, _ in packets])


def _once(condition: Condition, speech: Samples, number: int, place: Path) -> tuple[float, float, float]:
    """Share missing, predicted MOS and PESQ of one draw."""
    from pesq import pesq

    seed = [number, condition.packet_ms, round(condition.loss_pct * 10), [NONE, *PATTERNS].index(condition.pattern)]
    path = place / "lossy.pcap"
    path.write_bytes(capture(speech, condition, np.random.default_rng(seed)))
    profile = Profile(planning=WITHOUT_DELAY, conceals_loss=condition.conceals)
    audit = rtpaudit.audit(path, profile=profile)
    row = audit.streams.iloc[0]
    heard = audit.samples(row.stream, heard=True)
    score = pesq(RATE_HZ, speech[: len(heard)], heard, "nb")
    return float(row.loss_pct + row.discard_pct), float(row.mos_cqe), float(score)
