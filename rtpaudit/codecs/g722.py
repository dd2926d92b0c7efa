"""G.722 at 64 kbit/s: an octet holds two samples, six bits of the lower band and two of the higher.

Each band is an adaptive differential code: a quantised difference times a step size, added to what two poles and six
zeros predict. Step size and predictor adapt to the code itself, so the decoder needs nothing else; after a loss it goes
on from where it was. The tables and the order of rounding are those of ITU-T G.722 (11/1988), from memory; tests hold
them against two other decoders, sample by sample.
"""

from typing import Final

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel

Octets = NDArray[np.uint8]
Samples = NDArray[np.int16]
Offsets = NDArray[np.int64]
Words = NDArray[np.int32]


def _both_signs(*magnitudes: int) -> list[int]:
    """Levels of a code whose upper half, in the same order, is the positive one."""
    return [-one for one in magnitudes] + list(magnitudes)


LEVELS_4: Final = np.array(
    [0, -20456, -12896, -8968, -6288, -4240, -2584, -1200, 20456, 12896, 8968, 6288, 4240, 2584, 1200, 0], np.int32
)
"""of the lower band by its four upper bits, which alone adapt step size and predictor"""
LEVELS_6: Final = np.array(
    [-136] * 4
    + _both_signs(
        24808, 21904, 19008, 16704, 14984, 13512, 12280, 11192, 10232, 9360, 8576, 7856, 7192, 6576, 6000, 5456,
        4944, 4464, 4008, 3576, 3168, 2776, 2400, 2032, 1688, 1360, 1040, 728,
    )
    + [432, 136, -432, -136],
    np.int32,
)  # fmt: skip
"""of the lower band by all six bits, for what is heard"""
LEVELS_2: Final = np.array([-7408, -1616, 7408, 1616], np.int32)
"""of the higher band"""
LOW_STEP: Final = np.array([-60, 3042, 1198, 538, 334, 172, 58, -30, 3042, 1198, 538, 334, 172, 58, -30, -60], np.int32)
"""added to the logarithm of the step size, by the four upper bits"""
HIGH_STEP: Final = np.array([798, -214, 798, -214], np.int32)
POWERS: Final = np.rint(2048 * 2.0 ** (np.arange(32) / 32)).astype(np.int32)
"""of two, in steps of a thirty-second"""
MIRROR: Final = np.array([3, -11, 12, 32, -210, 951, 3876, -805, 362, -156, 53, -11], np.int32)
"""half of the 24 coefficients of the filter that joins the bands"""

STEP, LOG_STEP, PREDICTED, ZEROS, A1, A2, R1, R2, P1, P2, B, D = 0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 16
"""places in the state of a band: step size and its logarithm, prediction and the zeros' part of it, pole coefficients,
two past reconstructions, two past partial ones, six zero coefficients, six past differences"""
STATE = 22
TAPS = 24


def decode(octets: Octets) -> Samples:
    """Samples of G.722 octets, 16,000 a second, two an octet.

    Parameters
    ----------
    octets : uint8 array, shape (n,)
        Payloads of one stream in the order of its media time.

    Returns
    -------
    int16 array, shape (2 n,)

    References
    ----------
    ITU-T G.722 (11/1988), mode 1; RFC 3551, 4.5.2: the RTP clock counts 8000 a second nevertheless.
    """
    samples = np.empty(2 * len(octets), np.int16)
    bands = np.zeros((2, STATE), np.int32)
    bands[0, STEP], bands[1, STEP] = 32, 8
    _decode(octets, samples, bands, np.zeros(TAPS, np.int32))
    return samples


def decode_g722_packets(octets: Octets, offsets: Offsets) -> tuple[Samples, Offsets]:
    """``decode`` of many packets, the decoder going on from each to the next."""
    return decode(octets), 2 * offsets


@kernel
def _decode(octets: Octets, samples: Samples, bands: Words, taps: Words) -> None:
    low, high = bands[0], bands[1]
    for n in range(len(octets)):
        code = np.int32(octets[n])
        heard_low = low[PREDICTED] + (low[STEP] * LEVELS_6[code & 63] >> 15)
        heard_low = min(max(heard_low, -16384), 16383)
        coarse = (code & 63) >> 2
        difference = low[STEP] * LEVELS_4[coarse] >> 15
        _adapt_step(low, LOW_STEP[coarse], 18432, 8)
        _predict(low, difference)

        difference = high[STEP] * LEVELS_2[code >> 6] >> 15
        heard_high = min(max(high[PREDICTED] + difference, -16384), 16383)
        _adapt_step(high, HIGH_STEP[code >> 6], 22528, 10)
        _predict(high, difference)

        for i in range(TAPS - 2):
            taps[i] = taps[i + 2]
        taps[TAPS - 2], taps[TAPS - 1] = heard_low + heard_high, heard_low - heard_high
        even, odd = 0, 0
        for i in range(TAPS // 2):
            even += taps[2 * i + 1] * MIRROR[TAPS // 2 - 1 - i]
            odd += taps[2 * i] * MIRROR[i]
        samples[2 * n], samples[2 * n + 1] = _limit(even >> 11), _limit(odd >> 11)


@kernel
def _limit(value: int) -> int:
    return min(max(value, -32768), 32767)


@kernel
def _adapt_step(band: Words, change: int, log_max: int, shift: int) -> None:
    """Step size: its logarithm leaks by 1/128 and moves by what the code says (blocks 3 and SCALE)."""
    logarithm = min(max((band[LOG_STEP] * 127 >> 7) + change, 0), log_max)
    band[LOG_STEP] = logarithm
    down = shift - (logarithm >> 11)
    power = POWERS[logarithm >> 6 & 31]
    band[STEP] = (power << -down if down < 0 else power >> down) << 2


@kernel
def _predict(band: Words, difference: int) -> None:
    """Poles and zeros move against the signs of what they just saw, then predict the next sample (block 4)."""
    reconstructed = _limit(band[PREDICTED] + difference)
    partial = _limit(band[ZEROS] + difference)
    like_last, like_before = (partial < 0) == (band[P1] < 0), (partial < 0) == (band[P2] < 0)

    steep = _limit(band[A1] << 2)
    a2 = (128 if like_before else -128) + (min(-steep if like_last else steep, 32767) >> 7) + (band[A2] * 32512 >> 15)
    a2 = min(max(a2, -12288), 12288)
    a1 = _limit((192 if like_last else -192) + (band[A1] * 32640 >> 15))
    room = _limit(15360 - a2)
    a1 = min(max(a1, -room), room)

    gain = 128 if difference != 0 else 0
    zeros = 0
    for i in range(5, -1, -1):
        like = (band[D + i] < 0) == (difference < 0)
        band[B + i] = _limit((gain if like else -gain) + (band[B + i] * 32640 >> 15))
        band[D + i] = band[D + i - 1] if i > 0 else difference
        zeros += band[B + i] * _limit(2 * band[D + i]) >> 15
    zeros = _limit(zeros)

    band[R2], band[R1] = band[R1], reconstructed
    band[P2], band[P1] = band[P1], partial
    band[A1], band[A2], band[ZEROS] = a1, a2, zeros
    poles = _limit((a1 * _limit(2 * band[R1]) >> 15) + (a2 * _limit(2 * band[R2]) >> 15))
    band[PREDICTED] = _limit(poles + zeros)
