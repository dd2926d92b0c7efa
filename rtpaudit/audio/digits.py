"""Digits sent as tones in the sound itself (DTMF)."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import FULL_SCALE, dbov
from rtpaudit.audio.scan import Samples, Scan

ROWS_HZ = (697.0, 770.0, 852.0, 941.0)
COLUMNS_HZ = (1209.0, 1336.0, 1477.0, 1633.0)
KEYS = ("123A", "456B", "789C", "*0#D")
"""ITU-T Q.23, from memory"""
FREQUENCY_SHARE = 0.025
"""1.5 % have to be accepted, 3.5 % refused. ITU-T Q.24, from memory"""
LEAST_TONE_S = 0.033
"""40 ms have to be accepted (RFC 4733, 3.1, citing Q.24), 23 ms refused (Q.24, from memory)"""
LONGEST_BREAK_S = 0.02
"""a break of 10 ms does not end a digit (Q.24, from memory), a pause of 40 ms does (RFC 4733, 3.1, citing Q.24)"""
TWIST_DB = (-9.0, 6.0)
"""column over row: 4 dB up and 8 dB down have to be accepted (Q.24, from memory); the rest is allowance"""
LEAST_DBOV = -40.0
"""of the softer tone: about -34 dBm0, below what receivers have to accept (common practice)"""
WINDOW_S = 0.0256
HOP_S = 0.005
PURITY = 0.8
"""share of the power of a window that the two tones hold"""
CALM_BLOCKS = 3
"""a tone of 40 ms holds at least three whole blocks of 10 ms"""
CALM_RATIO = 1.6
"""2 dB: the power of three blocks, over which the beat of the two tones nearly evens out"""
CREST = (2.6, 5.3)
"""square of peak over root mean square: 4 for two equal tones, 3.4 for a twist of 8 dB (allowance: common practice)"""
BATCH = 4096


@dataclass(frozen=True, slots=True)
class Digit:
    """One key pressed."""

    digit: str
    from_s: float
    to_s: float
    level_dbov: float
    """of both tones together"""
    twist_db: float
    """column over row"""
    confidence_pct: float


def digits_of(samples: Samples, scanned: Scan) -> list[Digit]:
    """Digits in the sound.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    scanned : Scan
        Of these samples.

    Returns
    -------
    list of Digit
        In order of time; times are right to about 5 ms.

    Notes
    -----
    Only passages that are calm and low in crest for 30 ms are looked at. In windows of 25.6 ms every 5 ms the two tones
    have to hold 80 % of the power, at frequencies that the advance of their phases shows to be right within 2.5 %.

    References
    ----------
    ITU-T Q.23, Q.24 (from memory); RFC 4733, 3.1.
    """
    rate = scanned.sampling_rate_hz
    hop, length = round(HOP_S * rate), round(WINDOW_S * rate)
    places = _places(samples, scanned, hop, length)
    if not len(places):
        return []
    keys, powers = np.full(len(places), -1), np.zeros((len(places), 2))
    for first in range(0, len(places), BATCH):
        part = slice(first, first + BATCH)
        keys[part], powers[part] = _heard(samples, places[part], hop, length, rate)
    return _digits(places, keys, powers, hop, length, rate)


def _calm(scanned: Scan) -> NDArray[np.int64]:
    """Blocks at which three begin that are calm and as low in crest as two tones."""
    power = np.nan_to_num(scanned.power())
    if len(power) < CALM_BLOCKS or scanned.sampling_rate_hz < 2 * COLUMNS_HZ[-1]:
        return np.empty(0, np.int64)
    peak = np.maximum(scanned.peak - abs(scanned.dc_offset), 0.0)
    low, high, top = power[2:].copy(), power[2:].copy(), peak[2:].copy()
    for shift in (0, 1):
        np.minimum(low, power[shift : shift - 2], out=low)
        np.maximum(high, power[shift : shift - 2], out=high)
        np.maximum(top, peak[shift : shift - 2], out=top)
    calm = (high <= CALM_RATIO * low) & (low > FULL_SCALE**2 * 10.0 ** (LEAST_DBOV / 10.0))
    calm &= (top * top <= CREST[1] * high) & (top * top >= CREST[0] * low)
    return np.flatnonzero(calm)


def _places(samples: Samples, scanned: Scan, hop: int, length: int) -> NDArray[np.int64]:
    """First samples of the windows to look at, in order: those around calm places in which there is a key."""
    rate, block = scanned.sampling_rate_hz, scanned.block_samples
    calm = _calm(scanned) * block
    calm = calm[calm + hop + length <= len(samples)]
    sure = [_heard(samples, calm[k : k + BATCH], hop, length, rate)[0] >= 0 for k in range(0, len(calm), BATCH)]
    if not sure:
        return calm
    reach = np.arange(-2 * block // hop, (CALM_BLOCKS + 2) * block // hop) * hop
    places = np.unique(calm[np.concatenate(sure)][:, None] // hop * hop + reach)
    return places[(places >= 0) & (places + hop + length <= len(samples))]


def _heard(
    samples: Samples, places: NDArray[np.int64], hop: int, length: int, rate: int
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Key 0..15 of each window, -1 for none, and the mean squares of its row and column tones. Shape (windows, 2)."""
    nominal = np.array(ROWS_HZ + COLUMNS_HZ)
    angle = 2.0 * np.pi * np.outer(np.arange(length), nominal) / rate
    cos, sin = np.cos(angle).astype(np.float32), np.sin(angle).astype(np.float32)
    offsets = np.arange(length)
    now, later = (samples[places[:, None] + offsets + shift].astype(np.float32) for shift in (0, hop))
    here, there = now @ cos - 1j * (now @ sin), later @ cos - 1j * (later @ sin)
    strength = here.real**2 + here.imag**2
    row, column = strength[:, :4].argmax(axis=1), 4 + strength[:, 4:].argmax(axis=1)
    every = np.arange(len(places))
    powers = np.empty((len(places), 2))
    right = np.ones(len(places), np.bool_)
    for side, tone in enumerate((row, column)):
        turned = np.angle(
            there[every, tone] * np.conj(here[every, tone]) * np.exp(-2j * np.pi * nominal[tone] * hop / rate)
        )
        off = turned * rate / (2.0 * np.pi * hop)
        right &= np.abs(off) <= FREQUENCY_SHARE * nominal[tone]
        # Beside its bin a tone shows less of its power: put that back.
        shown = np.sinc(off * length / rate) ** 2
        powers[:, side] = 2.0 * strength[every, tone] / length**2 / np.maximum(shown, 0.3)
    whole = np.mean(now * now, axis=1) - now.mean(axis=1) ** 2
    twist = 10.0 * np.log10(np.maximum(powers[:, 1], 1e-9) / np.maximum(powers[:, 0], 1e-9))
    right &= (powers.sum(axis=1) >= PURITY * whole) & (twist >= TWIST_DB[0]) & (twist <= TWIST_DB[1])
    right &= powers.min(axis=1) > FULL_SCALE**2 * 10.0 ** (LEAST_DBOV / 10.0)
    return np.where(right, 4 * row + column - 4, -1), powers


def _digits(
    places: NDArray[np.int64],
    keys: NDArray[np.int64],
    powers: NDArray[np.float64],
    hop: int,
    length: int,
    rate: int,
) -> list[Digit]:
    """Windows of one key put together."""
    heard = np.flatnonzero(keys >= 0)
    if not len(heard):
        return []
    apart = np.diff(places[heard]) > hop + LONGEST_BREAK_S * rate
    breaks = np.flatnonzero(apart | (np.diff(keys[heard]) != 0)) + 1
    found = []
    for group in np.split(heard, breaks):
        # A window counts from 80 % of tone on, so the tone begins inside the first and ends inside the last.
        slack = (1.0 - PURITY) * length - hop / 2
        start, end = (places[group[0]] + slack) / rate, (places[group[-1]] + length - slack) / rate
        if end - start < LEAST_TONE_S:
            continue
        row, column = np.median(powers[group], axis=0)
        key = int(keys[group[0]])
        found.append(
            Digit(
                KEYS[key // 4][key % 4],
                float(start),
                float(end),
                float(dbov(row + column)),
                float(10.0 * np.log10(column / row)),
                min(99.0, 60.0 + 500.0 * (end - start)),
            )
        )
    return found
