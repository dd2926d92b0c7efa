"""Two people who talk with each other, out of the spoken files of the fixtures."""

from functools import cache

import numpy as np
import soundfile
from numpy.typing import NDArray

from tests.sources import ROOT

FILES = ("reader", "desk", "guest")
FULL_SCALE = 32768.0

Sound = NDArray[np.float64]


@cache
def spoken(name: str) -> Sound:
    """One of the spoken files at 8 kHz without its offset, at -26 dBov of root mean square."""
    samples, rate = soundfile.read(ROOT / "fixtures" / "audio" / f"{name}.wav", dtype="float64")
    assert rate == 8000
    samples = samples - np.convolve(samples, np.ones(400) / 400, "same")
    return samples * (10 ** (-26 / 20) / np.sqrt(np.mean(samples**2)))


def voice(draw: np.random.Generator, name: str, seconds: float, rate: int) -> Sound:
    """A stretch of a voice from anywhere in its file, a little higher or lower than it was spoken."""
    source = spoken(name)
    pace = draw.uniform(0.92, 1.08) * 8000 / rate
    begin = draw.integers(len(source))
    place = (begin + np.arange(int(seconds * rate)) * pace) % (len(source) - 1)
    return np.interp(place, np.arange(len(source)), source)


def conversation(
    draw: np.random.Generator,
    seconds: float,
    rates: tuple[int, int],
    levels_dbov: tuple[float, float],
    noises_dbov: tuple[float, float],
) -> tuple[Sound, Sound]:
    """What caller and callee say: turns with short pauses, now and then at the same time; noise of the room below."""
    names = draw.choice(FILES, 2, replace=False)
    said = []
    for k in (0, 1):
        gain = 10 ** ((levels_dbov[k] + 26) / 20)
        said.append(voice(draw, str(names[k]), seconds, rates[k]) * gain)
    speaks = [np.zeros(len(one)) for one in said]
    at, turn = draw.uniform(0.0, 1.0), int(draw.integers(2))
    while at < seconds:
        length = draw.uniform(1.2, 5.0)
        _open(speaks[turn], at, at + length, rates[turn])
        if draw.random() < 0.15:
            # The other one throws something in.
            begin = at + draw.uniform(0.2, 0.8) * length
            _open(speaks[1 - turn], begin, begin + draw.uniform(0.3, 0.9), rates[1 - turn])
        at += length + draw.uniform(-0.2, 0.8)
        turn = 1 - turn
    return tuple(
        _with_room(draw, one * gate, noise, rate)
        for one, gate, noise, rate in zip(said, speaks, noises_dbov, rates, strict=True)
    )  # type: ignore[return-value]


def _open(gate: Sound, begin_s: float, end_s: float, rate: int) -> None:
    """Let a voice through between two moments, with soft edges."""
    ramp = int(0.03 * rate)
    first, last = int(begin_s * rate), min(int(end_s * rate), len(gate))
    if last - first <= 2 * ramp:
        return
    shape = np.ones(last - first)
    shape[:ramp], shape[-ramp:] = np.linspace(0, 1, ramp), np.linspace(1, 0, ramp)
    gate[first:last] = np.maximum(gate[first:last], shape)


def _with_room(draw: np.random.Generator, sound: Sound, noise_dbov: float, rate: int) -> Sound:
    """Noise of a room: louder at low frequencies."""
    white = draw.normal(0, 1, len(sound) + 8)
    brown = np.convolve(white, np.array([1, 0.9, 0.7, 0.5, 0.3, 0.2, 0.1, 0.05]), "valid")[: len(sound)]
    return sound + brown * (10 ** (noise_dbov / 20) / np.sqrt(np.mean(brown**2)))


def to_16_bit(sound: Sound) -> NDArray[np.int16]:
    """Samples as an encoder takes them."""
    return np.clip(np.rint(sound * FULL_SCALE), -32768, 32767).astype(np.int16)


def level_dbov(sound: Sound) -> float:
    """Root mean square. [dBov]"""
    return float(10 * np.log10(np.mean(sound**2) + 1e-12))


def room_echo(sound: Sound, rate: int, delay_s: float, loss_db: float) -> Sound:
    """What comes back of a sound after a while: softer, and a little coloured."""
    late = int(delay_s * rate)
    tail = np.convolve(sound, np.array([1.0, 0.3, -0.15, 0.08]), "same")
    back = np.concatenate([np.zeros(late), tail])[: len(sound)]
    return back * 10 ** (-loss_db / 20)
