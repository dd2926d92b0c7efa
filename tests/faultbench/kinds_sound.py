"""Faults of the sound: levels, noise, hum, clipping, silence, law, echo, robbed bits, slips, second coding."""

from itertools import pairwise

import numpy as np

from rtpaudit.codecs.g711 import PCMA_SAMPLES, PCMU_SAMPLES, encode_pcma, encode_pcmu
from tests.faultbench.kinds import kind
from tests.faultbench.kinds_network import TALKING
from tests.faultbench.plan import Plan
from tests.faultbench.voices import FULL_SCALE, to_16_bit

G711 = ("PCMU", "PCMA")


@kind("level-low")
def level_low(plan: Plan) -> None:
    draw = plan.draw
    level = float(draw.uniform(-52, -46))
    for leg in plan.legs:
        leg.level_dbov = level + float(draw.uniform(-2, 2))
        leg.noise_dbov = float(draw.uniform(-82, -76))


@kind("level-high")
def level_high(plan: Plan) -> None:
    """Loud but not cut off."""
    draw = plan.draw
    level = float(draw.uniform(-11.5, -9.5))
    for leg in plan.legs:
        leg.level_dbov = level + float(draw.uniform(-1, 1))
        leg.sound.append(_soft_limit)


def _soft_limit(sound: np.ndarray, rate: int) -> np.ndarray:
    return np.tanh(sound / 0.9) * 0.9


@kind("level-unequal")
def level_unequal(plan: Plan) -> None:
    leg = plan.leg()
    leg.level_dbov = float(plan.draw.uniform(-37, -34))
    plan.other(leg).level_dbov = leg.level_dbov + float(plan.draw.uniform(14, 18))
    leg.noise_dbov = float(plan.draw.uniform(-76, -70))


@kind("clipping", encodings=(*G711, "L16"))
def clipping(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    gain = 10 ** (float(draw.uniform(14, 22)) / 20)
    ceiling = float(draw.choice([1.0, draw.uniform(0.3, 0.9)]))
    leg.sound.append(lambda sound, rate: np.clip(sound * gain, -ceiling, ceiling))


@kind("noise")
def noise(plan: Plan) -> None:
    leg = plan.leg()
    leg.noise_dbov = float(plan.draw.uniform(-44, -37))
    leg.suppression = ""


@kind("hum")
def hum(plan: Plan) -> None:
    draw, leg = plan.draw, plan.leg()
    leg.suppression = ""
    mains = float(draw.choice([50, 60])) + float(draw.uniform(-0.05, 0.05))
    level = 10 ** (float(draw.uniform(-45, -36)) / 20)
    weights = [1.0, float(draw.uniform(0.3, 0.8)), float(draw.uniform(0.3, 0.7)), 0.2, 0.2]

    def act(sound: np.ndarray, rate: int) -> np.ndarray:
        t = np.arange(len(sound)) / rate
        wave = sum(w * np.sin(2 * np.pi * mains * (k + 1) * t + k) for k, w in enumerate(weights))
        return sound + wave * level / np.sqrt(np.mean(wave**2))

    leg.sound.append(act)


@kind("dead-air", suppression=TALKING)
def dead_air(plan: Plan) -> None:
    """Packets go on, with nothing in them."""
    draw, leg = plan.draw, plan.leg()
    whole = draw.random() < 0.5
    plan.longer(20, 40)
    begin = 0.0 if whole else float(draw.uniform(4, 8))
    end = plan.seconds if whole else begin + float(draw.uniform(7, 11))

    def act(sound: np.ndarray, rate: int) -> np.ndarray:
        sound = sound.copy()
        sound[int(begin * rate) : int(end * rate)] = 0.0
        return sound

    leg.sound.append(act)
    if not whole:
        plan.other(leg).sound.append(act)


@kind("wrong-law", encodings=G711)
def wrong_law(plan: Plan) -> None:
    leg = plan.leg()
    leg.encoded_as = "PCMA" if leg.encoding == "PCMU" else "PCMU"
    leg.suppression = ""


@kind("echo", encodings=G711, suppression=TALKING)
def echo(plan: Plan) -> None:
    draw = plan.draw
    plan.longer(25, 50)
    plan.far["echo_loss_db"] = float(draw.uniform(10, 20))
    plan.far["echo_delay_s"] = float(draw.uniform(0.06, 0.3))
    plan.far["echo_of_callee"] = float(draw.integers(2))
    for leg in plan.legs:
        leg.skew_ppm = float(draw.uniform(-10, 10))


@kind("robbed-bits", encodings=("PCMU",), suppression=TALKING)
def robbed_bits(plan: Plan) -> None:
    """Signalling in the low bit of every sixth octet."""
    draw, leg = plan.draw, plan.leg()
    offset, bit = int(draw.integers(6)), int(draw.integers(2))

    def act(packets) -> None:
        begin = 0
        for k in range(len(packets)):
            octets = np.frombuffer(packets.payload[k], np.uint8).copy()
            rows = (np.arange(len(octets)) + begin) % 6 == offset
            octets[rows] = octets[rows] & 0xFE | bit
            packets.payload[k] = octets.tobytes()
            begin += len(octets)

    leg.sender.append(act)


@kind("clock-slips", encodings=G711, suppression=TALKING)
def clock_slips(plan: Plan) -> None:
    """Single samples repeated at intervals, where two clocks meet between gateways."""
    draw, leg = plan.draw, plan.leg()
    plan.longer(40, 60)
    leg.level_dbov = float(draw.uniform(-24, -20))
    every = float(draw.uniform(0.5, 1.2))
    leg.sound.append(lambda sound, rate: _slipped(sound, rate, every, 1))


@kind("clock-slips/frames", encodings=G711, suppression=TALKING)
def clock_slips_of_frames(plan: Plan) -> None:
    """Frames of 10 ms repeated at intervals."""
    draw, leg = plan.draw, plan.leg()
    plan.longer(30, 60)
    every = float(draw.uniform(0.8, 2.5))
    leg.sound.append(lambda sound, rate: _slipped(sound, rate, every, rate // 100))


def _slipped(sound: np.ndarray, rate: int, every_s: float, size: int) -> np.ndarray:
    """The last samples said again, at even intervals; as long as before."""
    cuts = [int(moment * rate) for moment in np.arange(every_s, len(sound) / rate, every_s)]
    edges = [0, *cuts, len(sound)]
    parts = [sound[max(first - (size if first else 0), 0) : last] for first, last in pairwise(edges)]
    return np.concatenate(parts)[: len(sound)]


@kind("second-transcoding", encodings=G711)
def second_transcoding(plan: Plan) -> None:
    """Speech that was coded by the other law before."""
    leg = plan.leg()
    encode, table = (encode_pcma, PCMA_SAMPLES) if leg.encoding == "PCMU" else (encode_pcmu, PCMU_SAMPLES)
    leg.sound.append(lambda sound, rate: table[encode(to_16_bit(sound))] / FULL_SCALE)
