"""Sounds made by hand for the tests of the audio bench, at 8000 samples a second unless said otherwise."""

import csv
from pathlib import Path

import numpy as np
import soundfile

PUBLISHED = Path(__file__).parents[1] / "published"
FIXTURES = Path(__file__).parents[2] / "fixtures" / "audio"
RATE = 8000
FULL_SCALE = 32768.0


def rows_of(name, *starts):
    """Rows of a published table whose id begins so."""
    with (PUBLISHED / name).open() as file:
        return [row for row in csv.DictReader(file) if row["id"].startswith(starts)]


def inputs_of(row):
    """The ``name=value`` pairs of a row."""
    return dict(pair.split("=", 1) for pair in row["inputs"].split("; ") if "=" in pair)


def sine(hz, seconds, dbov, rate=RATE, phase=0.3):
    """A sine of a given root mean square, as floats."""
    time = np.arange(round(seconds * rate)) / rate
    return FULL_SCALE * 10 ** (dbov / 20) * np.sqrt(2) * np.sin(2 * np.pi * hz * time + phase)


def noise(seconds, dbov, seed=1, rate=RATE):
    """White Gaussian noise of a given root mean square, as floats."""
    return np.random.default_rng(seed).normal(0.0, FULL_SCALE * 10 ** (dbov / 20), round(seconds * rate))


def silence(seconds, rate=RATE):
    return np.zeros(round(seconds * rate))


def to_int16(*parts):
    """Floats one after the other as samples, cut at full scale."""
    return np.clip(np.rint(np.concatenate(parts)), -32768, 32767).astype(np.int16)


def reader():
    """Ten seconds of a person reading aloud."""
    samples, rate = soundfile.read(FIXTURES / "reader.wav", dtype="int16")
    assert rate == RATE
    return samples


def through(law, samples):
    """What the samples are after one coding by a law of G.711."""
    from rtpaudit.codecs import g711

    encode, decode = {"PCMU": (g711.encode_pcmu, g711.decode_pcmu), "PCMA": (g711.encode_pcma, g711.decode_pcma)}[law]
    return decode(encode(samples))


def packets(octets, size=160):
    """Octets cut into payloads: (octets, start, length, ticks)."""
    count = len(octets) // size
    start = np.arange(count, dtype=np.int64) * size
    return octets[: count * size], start, np.full(count, size, np.int32), start.copy()
