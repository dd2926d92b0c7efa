"""Fields of either byte order, read inside kernels."""

import numpy as np

from rtpaudit.capture.frames import Octets
from rtpaudit.kernels import kernel


@kernel
def u16(octets: Octets, at: int, big: bool) -> int:
    """Unsigned 16-bit field; ``big`` for big-endian."""
    first, second = np.int64(octets[at]), np.int64(octets[at + 1])
    return int(first << 8 | second if big else second << 8 | first)


@kernel
def u32(octets: Octets, at: int, big: bool) -> int:
    """Unsigned 32-bit field; ``big`` for big-endian."""
    a, b = np.int64(octets[at]), np.int64(octets[at + 1])
    c, d = np.int64(octets[at + 2]), np.int64(octets[at + 3])
    return int(a << 24 | b << 16 | c << 8 | d if big else d << 24 | c << 16 | b << 8 | a)
