"""Sample values of the two laws of G.711, and the octets that stand for samples: what the wrong law makes of either."""

from functools import cache

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.scan import Samples

Octets = NDArray[np.uint8]
LAWS = ("PCMU", "PCMA")


@cache
def values(law: str) -> Samples:
    """Sample of each octet of a law. ITU-T G.711 (11/1988), Tables 1 and 2. Shape (256,)."""
    wire = np.arange(256)
    code = (wire ^ 0xFF) if law == "PCMU" else (wire ^ 0x55)
    segment, step = code >> 4 & 7, code & 15
    if law == "PCMU":
        # The inverted polarity bit is 1 where the sample is negative.
        magnitude, positive = 4 * (((2 * step + 33) << segment) - 33), code < 128
    else:
        magnitude = 8 * np.where(segment == 0, 2 * step + 1, (2 * step + 33) << np.maximum(segment - 1, 0))
        positive = code >= 128
    return np.where(positive, magnitude, -magnitude).astype(np.int16)


def octets_of(samples: Samples, law: str) -> Octets:
    """Octet whose sample is nearest, any shape; exact for samples that were decoded from the law."""
    return _nearest(law)[samples.view(np.uint16)]


def reread(samples: Samples, law: str, other: str) -> Samples:
    """Samples that were decoded by ``law``, as ``other`` decodes the same octets. Any shape."""
    return values(other)[octets_of(samples, law)]


@cache
def _nearest(law: str) -> Octets:
    """Octet nearest to each 16-bit sample, by its unsigned value. Shape (65536,)."""
    table = values(law).astype(np.int64)
    order = np.argsort(table, kind="stable")
    middles = (table[order][1:] + table[order][:-1]) / 2.0
    sample = np.arange(65536).astype(np.uint16).view(np.int16)
    return order[np.searchsorted(middles, sample)].astype(np.uint8)
