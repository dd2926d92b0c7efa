"""Comfort noise (RFC 3389): a level, and the shape of the spectrum as reflection coefficients of an all-pole model."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.errors import MalformedPacket
from rtpaudit.kernels import kernel

Octets = NDArray[np.uint8]
Samples = NDArray[np.int16]
Reals = NDArray[np.float64]

FULL_SCALE = 32768.0
"""rms of the square wave at 0 dBov"""
ORDER_MAX = 32
"""of the model; a decoder may set higher coefficients to zero (RFC 3389, 3)"""


@dataclass(frozen=True, slots=True)
class ComfortNoise:
    """One comfort-noise payload (RFC 3389, 3)."""

    level_dbov: float
    reflection: tuple[float, ...] = ()
    """first coefficient negative for noise that is louder at low frequencies (sign: ITU-T practice, from memory)"""

    @classmethod
    def parse(cls, octets: bytes) -> "ComfortNoise":
        """Level and coefficients of a payload (RFC 3389, 3.1 to 3.3); the unused top bit of the level is ignored."""
        if not octets:
            raise MalformedPacket("comfort noise has no octets, needs 1 for its level")
        indices = octets[1 : 1 + ORDER_MAX]
        # 255 is reserved: no coefficient.
        reflection = tuple(0.0 if index == 255 else 258 * (index - 127) / 32768 for index in indices)
        return cls(level_dbov=-float(octets[0] & 0x7F), reflection=reflection)


def generate(noises: list[ComfortNoise], counts: NDArray[np.int64], seed: int = 0) -> Samples:
    """Noise of many payloads, one after the other.

    Parameters
    ----------
    noises : list of ComfortNoise
    counts : int64 array, shape (noises,)
        Samples wanted of each. [samples]
    seed : int
        Of the excitation: the same arguments give the same noise.

    Returns
    -------
    int16 array, shape (sum of counts,)
        Gaussian, at the level and with the spectrum of each payload.

    References
    ----------
    RFC 3389, clause 3. A model of coefficients k raises the power of its excitation by the product of 1 / (1 - k^2)
    (Levinson's recursion).
    """
    order = max((len(one.reflection) for one in noises), default=0)
    reflection = np.zeros((len(noises), order))
    for row, one in enumerate(noises):
        reflection[row, : len(one.reflection)] = one.reflection
    level = FULL_SCALE * 10.0 ** (np.array([one.level_dbov for one in noises]) / 20.0)
    gain = level * np.sqrt(np.prod(1.0 - reflection**2, axis=1))
    wave = np.random.default_rng(seed).standard_normal(int(counts.sum())) * np.repeat(gain, counts)
    if reflection.any():
        _shape(wave, reflection, counts, np.zeros(order + 1))
    return np.asarray(np.clip(np.rint(wave), -32768, 32767), np.int16)


@kernel
def _shape(wave: Reals, reflection: Reals, counts: NDArray[np.int64], backward: Reals) -> None:
    """All-pole lattice filter in place; its state goes on from one payload to the next."""
    order = reflection.shape[1]
    n = 0
    for row in range(len(counts)):
        for _ in range(counts[row]):
            forward = wave[n]
            for m in range(order - 1, -1, -1):
                forward -= reflection[row, m] * backward[m]
                backward[m + 1] = backward[m] + reflection[row, m] * forward
            backward[0] = forward
            wave[n] = forward
            n += 1
