"""Groups of consecutive payloads spread over a stream: a measure need not read every octet (common practice)."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.coding import Octets

Positions = NDArray[np.int64]
Lengths = NDArray[np.int32]


def payload_groups(
    octets: Octets, start: Positions, length: Lengths, packets: int, groups: int
) -> Iterator[tuple[slice, list[Octets]]]:
    """Rows and payloads of at most ``groups`` groups of ``packets`` packets, spread evenly over the stream.

    Parameters
    ----------
    octets : uint8 array, shape (octets,)
    start : int64 array, shape (n,)
    length : int32 array, shape (n,)
        Payload ``i`` is ``octets[start[i]:start[i] + length[i]]``; one that would leave the buffer comes out shorter.
    packets, groups : int

    Yields
    ------
    rows : slice
    payloads : list of uint8 arrays
    """
    count = len(start) // packets if len(start) >= packets else 1
    for k in np.unique(np.linspace(0, count - 1, min(groups, count)).astype(np.int64)).tolist():
        rows = slice(k * packets, min((k + 1) * packets, len(start)))
        firsts, lasts = start[rows].tolist(), (start[rows] + length[rows]).tolist()
        yield rows, [octets[max(0, a) : max(0, b)] for a, b in zip(firsts, lasts, strict=True)]
