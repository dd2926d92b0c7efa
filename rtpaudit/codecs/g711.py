"""G.711: PCMU (mu-law) and PCMA (A-law), by table both ways.

An octet is one polarity bit (1 is positive), three segment bits and four step bits. On the line mu-law inverts all
bits and A-law every even one, so that silence keeps the line busy.
"""

from functools import cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

Octets = NDArray[np.uint8]
Samples = NDArray[np.int16]
Offsets = NDArray[np.int64]

POLARITY = 0x80
PCMU_BIAS = 33
"""added to a 14-bit magnitude so that every segment begins at a power of two"""
PCMU_OVERLOAD = 8158
"""largest 14-bit magnitude that does not clip"""


def _pcmu_samples() -> Samples:
    """Value of each mu-law octet at the decoder output, 14 bits shifted up to 16. ITU-T G.711 (11/1988), Table 2."""
    code = ~np.arange(256) & 0xFF
    segment, step = code >> 4 & 7, code & 15
    magnitude = ((2 * step + PCMU_BIAS) << segment) - PCMU_BIAS
    return np.where(code & POLARITY, -4 * magnitude, 4 * magnitude).astype(np.int16)


def _pcma_samples() -> Samples:
    """Value of each A-law octet at the decoder output, 13 bits shifted up to 16. ITU-T G.711 (11/1988), Table 1."""
    code = np.arange(256) ^ 0x55
    segment, step = code >> 4 & 7, code & 15
    magnitude = np.where(segment == 0, 2 * step + 1, (2 * step + 33) << np.maximum(segment - 1, 0))
    return np.where(code & POLARITY, 8 * magnitude, -8 * magnitude).astype(np.int16)


PCMU_SAMPLES: Final = _pcmu_samples()
PCMA_SAMPLES: Final = _pcma_samples()


def decode_pcmu(octets: Octets) -> Samples:
    """Samples of mu-law octets, any shape. ITU-T G.711 (11/1988), Table 2; full scale is 32124."""
    return PCMU_SAMPLES[octets]


def decode_pcma(octets: Octets) -> Samples:
    """Samples of A-law octets, any shape. ITU-T G.711 (11/1988), Table 1; full scale is 32256."""
    return PCMA_SAMPLES[octets]


def decode_pcmu_packets(octets: Octets, offsets: Offsets) -> tuple[Samples, Offsets]:
    """``decode_pcmu`` of many packets: one sample an octet, so the offsets stay."""
    return decode_pcmu(octets), offsets


def decode_pcma_packets(octets: Octets, offsets: Offsets) -> tuple[Samples, Offsets]:
    """``decode_pcma`` of many packets: one sample an octet, so the offsets stay."""
    return decode_pcma(octets), offsets


def encode_pcmu(samples: Samples) -> Octets:
    """Mu-law octets of samples, any shape. ITU-T G.711 (11/1988), Table 2, on sign and magnitude.

    Notes
    -----
    A sample on a decision value goes to the larger magnitude. Encoders that shift two's complement differ there by one
    step for negative samples.
    """
    octets: Octets = _pcmu_octets()[np.asarray(samples, np.int16).view(np.uint16)]
    return octets


def encode_pcma(samples: Samples) -> Octets:
    """A-law octets of samples, any shape. ITU-T G.711 (11/1988), Table 1; notes as for ``encode_pcmu``."""
    octets: Octets = _pcma_octets()[np.asarray(samples, np.int16).view(np.uint16)]
    return octets


@cache
def _pcmu_octets() -> Octets:
    sample = np.arange(1 << 16).astype(np.uint16).view(np.int16).astype(np.int64)
    biased = np.minimum(np.abs(sample) >> 2, PCMU_OVERLOAD) + PCMU_BIAS
    segment = np.floor(np.log2(biased)).astype(np.int64) - 5
    code = segment << 4 | (biased >> (segment + 1)) & 15
    signed = np.where(sample < 0, code | POLARITY, code)
    return np.asarray(~signed & 0xFF, np.uint8)


@cache
def _pcma_octets() -> Octets:
    sample = np.arange(1 << 16).astype(np.uint16).view(np.int16).astype(np.int64)
    magnitude = np.minimum(np.abs(sample), 32767) >> 4
    segment = np.maximum(np.floor(np.log2(np.maximum(magnitude, 1))).astype(np.int64) - 3, 0)
    code = segment << 4 | (magnitude >> np.maximum(segment - 1, 0)) & 15
    signed = np.where(sample < 0, code, code | POLARITY)
    return np.asarray(signed ^ 0x55, np.uint8)
