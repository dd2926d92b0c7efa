"""Linear PCM: L16, sixteen bits and most significant octet first, and L8, eight bits with an offset (RFC 3551)."""

from typing import Final

import numpy as np
from numpy.typing import NDArray

Octets = NDArray[np.uint8]
Samples = NDArray[np.int16]
Offsets = NDArray[np.int64]

L8_SAMPLES: Final[Samples] = ((np.arange(256) - 128) * 256).astype(np.int16)
"""RFC 3551, 4.5.10: the most negative value is 0"""


def decode_l16_packets(octets: Octets, offsets: Offsets) -> tuple[Samples, Offsets]:
    """Samples of many packets; an odd last octet of a packet is left out. RFC 3551, 4.5.11."""
    lengths = np.diff(offsets)
    odd = lengths & 1 == 1
    if odd.any():
        whole = np.ones(len(octets), np.bool_)
        whole[offsets[1:][odd] - 1] = False
        octets = octets[whole]
    ends = np.concatenate([np.zeros(1, np.int64), np.cumsum(lengths // 2)])
    return np.ascontiguousarray(octets).view(">i2").astype(np.int16), ends


def decode_l8_packets(octets: Octets, offsets: Offsets) -> tuple[Samples, Offsets]:
    """Samples of many packets. RFC 3551, 4.5.10."""
    return L8_SAMPLES[octets], offsets
