"""TCP headers: batches of packets come in, the segments that open a connection or carry octets go out."""

from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.decode.packets import Kind, Packets

SYN, RST = 2, 4


@dataclass(order=True, slots=True)
class Segment:
    """Octets of one direction, and where they belong."""

    start: int
    """sequence number as read; once it is followed, the position in the stream, counting on over wraps"""
    length: int
    time_ns: int = field(compare=False)
    frame: int = field(compare=False)
    octets: bytes = field(compare=False)
    """fewer than ``length`` where a snap length cut"""


def read_segments(packets: Packets, refused: NDArray[np.bool_]) -> Iterator[tuple[int, bool, Segment]]:
    """Flow, whether a connection opens, and the segment (RFC 9293, 3.1); of refused flows only what opens one.

    ``refused`` is looked at again for each row, so that whoever reads may refuse a flow on the way.
    """
    rows = np.flatnonzero(packets.kind == Kind.TCP)
    if len(rows) == 0:
        return
    at = packets.start[rows]
    header = (packets.octets[at + 12] >> 4).astype(np.int32) * 4
    opens = (packets.octets[at + 13] & (SYN | RST)) == SYN
    length = np.maximum(packets.length[rows] - header, 0)
    useful = (header >= 20) & (opens | ((length > 0) & ~refused[packets.flow[rows]]))
    rows, header, opens, length, at = rows[useful], header[useful], opens[useful], length[useful], at[useful]
    # A SYN counts as one octet before the data (RFC 9293, 3.4).
    start = (_sequence(packets, at) + opens) % (1 << 32)
    first = at + header
    last = first + np.clip(packets.captured[rows] - header, 0, length)
    columns = (packets.flow[rows], opens, start, length, packets.time_ns[rows], packets.frame[rows], first, last)
    for flow, opening, place, count, time_ns, frame, begin, end in zip(
        *(column.tolist() for column in columns), strict=True
    ):
        if opening or not refused[flow]:
            yield flow, opening, Segment(place, count, time_ns, frame, packets.octets[begin:end].tobytes())


def _sequence(packets: Packets, at: NDArray[np.int64]) -> NDArray[np.int64]:
    octets = [packets.octets[at + 4 + place].astype(np.int64) for place in range(4)]
    return octets[0] << 24 | octets[1] << 16 | octets[2] << 8 | octets[3]
