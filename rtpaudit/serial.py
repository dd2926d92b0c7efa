"""Serial number arithmetic (RFC 1982, from memory) for 16-bit sequence numbers and 32-bit timestamps."""

import numpy as np
from numpy.typing import NDArray

Extended = NDArray[np.int64]


def unwrap(numbers: NDArray[np.unsignedinteger], bits: int) -> Extended:
    """Serial numbers as int64 that go on counting over every wrap.

    Parameters
    ----------
    numbers : unsigned integer array, shape (n,)
        Serial numbers in order of arrival.
    bits : int
        Width of the number on the wire, 16 or 32.

    Returns
    -------
    int64 array, shape (n,)
        Starts at ``numbers[0]``; each step is the signed difference of at most half the range.
    """
    if len(numbers) == 0:
        return np.empty(0, np.int64)
    half, full = 1 << (bits - 1), 1 << bits
    wide = numbers.astype(np.int64)
    steps = (np.diff(wide) + half) % full - half
    return np.concatenate([wide[:1], wide[0] + np.cumsum(steps)])
