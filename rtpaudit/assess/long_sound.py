"""Room for sound: of hours in a temporary file, so that it asks for no memory of its own."""

import mmap
import os
import tempfile
from math import prod

import numpy as np
from numpy.typing import NDArray

Samples = NDArray[np.int16]

MOST_IN_MEMORY = 32 << 20
"""octets: half an hour of one direction at 8 kHz"""


def silence(*shape: int) -> Samples:
    """Zeros of a shape, which may be written to. Where no temporary file can hold many of them, memory does."""
    octets = 2 * prod(shape)
    if octets > MOST_IN_MEMORY:
        try:
            with tempfile.TemporaryFile() as file:
                # Holes in the file would be found out when they are written to, too late for anything but a crash.
                os.posix_fallocate(file.fileno(), 0, octets)
                return np.frombuffer(mmap.mmap(file.fileno(), octets), np.int16).reshape(shape)
        except (AttributeError, OSError):
            pass
    return np.zeros(shape, np.int16)
