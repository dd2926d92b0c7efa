"""Tunnels that are common enough to enter without scapy: rows at a tunnel header in, rows at what it carries out.

Few captures hold any, so this is plain NumPy over the rows concerned. IP within IP needs no header of its own and is
entered in network.py.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Octets
from rtpaudit.decode.layers import (
    BY_VERSION,
    CUT,
    ETHERNET,
    GENEVE,
    GRE,
    GTP_U,
    LAST_LINK,
    LLC,
    MALFORMED,
    MAX_DEPTH,
    NOT_IP,
    RARE,
    TOO_DEEP,
    VXLAN,
    LayerTable,
    Rows,
)
from rtpaudit.decode.link_headers import ETHERTYPE_TABLE

Numbers = NDArray[np.int64]
Inner = tuple[Numbers, LayerTable]
"""length of each tunnel header, and the layer that follows it"""

HEADER = 8
"""octets that every tunnel header here has at least, but for a GRE header of four before a packet of 20"""


def enter_tunnels(rows: Rows, octets: Octets, base: int) -> bool:
    """Move every row at a tunnel header to what the tunnel carries; whether any row has headers left to take off."""
    layer = rows["layer"]
    inside = np.flatnonzero((layer >= GRE) & (layer <= GTP_U))
    for tunnel, read in TUNNELS.items():
        _enter(rows, inside[layer[inside] == tunnel], read, octets, base)
    return len(inside) > 0 or bool((layer <= LAST_LINK).any())


def _enter(rows: Rows, chosen: NDArray[np.intp], read: Callable[["Header"], Inner], octets: Octets, base: int) -> None:
    at, end, limit = (rows[name][chosen] for name in ("at", "end", "limit"))
    depth = rows["depth"][chosen] + np.uint8(1)
    refused = np.select(
        [at + HEADER > end, at + HEADER > limit, depth >= MAX_DEPTH], [MALFORMED, CUT, TOO_DEEP], default=0
    ).astype(np.uint8)
    rows["layer"][chosen] = refused
    rows["depth"][chosen] = depth
    good = refused == 0
    length, inner = read(Header(octets, at[good] - base, limit[good] - base))
    # What the tunnel names and we do not know is no work for the slow path: it would find the outer packet again.
    inner = np.where((inner == RARE) | (inner == LLC), NOT_IP, inner)
    rows["layer"][chosen[good]] = inner
    rows["at"][chosen[good]] += length


class Header:
    """Fields of one header in many rows; what lies beyond the captured octets reads as 0."""

    def __init__(self, octets: Octets, at: Numbers, limit: Numbers) -> None:
        self._octets, self._at, self._limit = octets, at, limit

    def u8(self, offset: int | Numbers) -> Numbers:
        """One octet of each header."""
        place = self._at + offset
        inside = place < self._limit
        return np.where(inside, self._octets[np.where(inside, place, 0)], 0).astype(np.int64)

    def u16(self, offset: int | Numbers) -> Numbers:
        """Two octets of each header in network byte order."""
        return self.u8(offset) << 8 | self.u8(offset + 1)


def _gre(header: Header) -> Inner:
    """GRE (RFC 2784, 2.1; RFC 2890, 2; version 1 RFC 2637, 4.1; from memory), also as switches send mirrored frames."""
    flags, ethertype = header.u16(0), header.u16(2)
    sequence = flags & 0x1000 != 0
    acknowledged = (flags & 0x0087) == 0x0081
    length = 4 + 4 * ((flags & 0x8000 != 0) * 1 + (flags & 0x2000 != 0) + sequence + acknowledged)
    # Mirror sessions, common practice: type I has no header, II eight octets, III twelve, and eight more by a flag.
    mirror_2 = (ethertype == 0x88BE) & sequence
    mirror_3 = ethertype == 0x22EB
    length += 8 * mirror_2 + (12 + 8 * (header.u8(length + 11) & 1)) * mirror_3
    inner = np.where((ethertype == 0x88BE) | mirror_3, ETHERNET, ETHERTYPE_TABLE[ethertype])
    routed = flags & 0x4000 != 0  # source routes of RFC 1701 are long out of use
    return length, np.where(routed | (flags & 7 > 1), NOT_IP, inner).astype(np.uint8)


def _vxlan(header: Header) -> Inner:
    """VXLAN (RFC 7348, 5; from memory): eight octets, then Ethernet."""
    length = np.full_like(header.u8(0), 8)
    return length, np.full(len(length), ETHERNET, np.uint8)


def _geneve(header: Header) -> Inner:
    """Geneve (RFC 8926, 3.4; from memory): eight octets, options, then what the EtherType says."""
    return 8 + 4 * (header.u8(0) & 63), ETHERTYPE_TABLE[header.u16(2)]


def _gtp_u(header: Header) -> Inner:
    """GTP-U (3GPP TS 29.281, 5.1, 5.2; from memory): eight octets, four more by three flags, extension headers."""
    flags = header.u8(0)
    length = np.where(flags & 7, 12, 8)
    more = (flags & 4 != 0) & (header.u8(11) != 0)
    for _ in range(MAX_DEPTH):
        size = np.where(more, 4 * header.u8(length), 0)
        length += size
        more &= (size > 0) & (header.u8(length - 1) != 0)
        if not more.any():
            break
    return length, np.full(len(length), BY_VERSION, np.uint8)


TUNNELS: dict[int, Callable[[Header], Inner]] = {GRE: _gre, VXLAN: _vxlan, GENEVE: _geneve, GTP_U: _gtp_u}
