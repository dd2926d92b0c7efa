"""IPv4 and IPv6 with their extension headers: rows at an IP header in, rows at transport, tunnel or fragment out."""

import numpy as np

from rtpaudit.decode.layers import (
    AUTHENTICATION_HEADER,
    CUT,
    EXTENSION_HEADER,
    FRAGMENT,
    FRAGMENT_HEADER,
    GRE,
    ICMP,
    IPV4,
    IPV6,
    MALFORMED,
    MAX_DEPTH,
    MPLS,
    OTHER_TRANSPORT,
    TCP,
    TOO_DEEP,
    UDP,
    LayerTable,
    Row,
    Rows,
)
from rtpaudit.decode.octets import u8, u16
from rtpaudit.kernels import inlined, kernel

PROTOCOLS: dict[int, int] = {
    1: ICMP,
    6: TCP,
    17: UDP,
    58: ICMP,
    # IP within IP (RFC 2003), IPv6 within IPv4 (RFC 4213), GRE (RFC 2784), MPLS (RFC 4023); numbers from memory
    4: IPV4,
    41: IPV6,
    47: GRE,
    137: MPLS,
    # RFC 8200, 4.3 to 4.6; RFC 4302, 2; the last three: RFC 6275, RFC 7401, RFC 5533 (all from memory)
    0: EXTENSION_HEADER,
    43: EXTENSION_HEADER,
    60: EXTENSION_HEADER,
    44: FRAGMENT_HEADER,
    51: AUTHENTICATION_HEADER,
    135: EXTENSION_HEADER,
    139: EXTENSION_HEADER,
    140: EXTENSION_HEADER,
}
"""IANA protocol numbers that lead to a packet."""


def _table() -> LayerTable:
    table = np.full(256, OTHER_TRANSPORT, np.uint8)
    for number, layer in PROTOCOLS.items():
        table[number] = layer
    return table


PROTOCOL_TABLE = _table()


@inlined
def _lacks(row: Row, needed: int | np.int64) -> bool:
    """Whether the next ``needed`` octets are not there, with the row's layer set to why.

    Callers wrap a constant in int64: for a bare one numba would compile this once more.
    """
    if row.at + needed > row.end:
        row.layer = MALFORMED
        return True
    if row.at + needed > row.limit:
        row.layer = CUT
        return True
    return False


@inlined
def _ipv4(row: Row) -> int:
    """IPv4 header (RFC 791, 3.1): the protocol that follows, or -1 where the row goes elsewhere."""
    at = row.at
    header = 4 * (u8(at) & 15)
    if u8(at) >> 4 != 4 or header < 20:
        row.layer = MALFORMED
        return -1
    if _lacks(row, header):
        return -1
    total = u16(at + 2)
    # Segmentation offload leaves a total length of 0, and then the frame itself says how long the packet is.
    if total != 0:
        if total < header:
            row.layer = MALFORMED
            return -1
        row.end = min(row.end, at + total)
    row.network_at = at
    row.dscp = u8(at + 1) >> 2
    row.ttl = u8(at + 8)
    row.ip_id = u16(at + 4)
    row.protocol = u8(at + 9)
    row.at = at + header
    if u16(at + 6) & 0x3FFF:  # more fragments, or an offset
        row.layer = FRAGMENT
        return -1
    return row.protocol


@inlined
def _ipv6(row: Row) -> int:
    """IPv6 header (RFC 8200, 3): the next header, or -1 where the row goes elsewhere."""
    at = row.at
    if u8(at) >> 4 != 6:
        row.layer = MALFORMED
        return -1
    if _lacks(row, np.int64(40)):
        return -1
    payload = u16(at + 4)
    if payload != 0:  # 0 in a jumbogram, and where segmentation is offloaded
        row.end = min(row.end, at + 40 + payload)
    row.network_at = at
    row.dscp = (u16(at) >> 6) & 63
    row.ttl = u8(at + 7)
    row.ip_id = 0
    row.at = at + 40
    return u8(at + 6)


@inlined
def _after_ip(row: Row, protocol: int, protocols: LayerTable) -> None:
    """Pass over extension headers (RFC 8200, 4; RFC 4302, 2.2) up to what can be a packet."""
    while True:
        layer = protocols[protocol]
        row.layer = layer
        row.protocol = protocol
        if layer < EXTENSION_HEADER or layer > AUTHENTICATION_HEADER:
            return
        row.depth += 1
        if row.depth >= MAX_DEPTH:
            row.layer = TOO_DEEP
            return
        if _lacks(row, np.int64(8)):
            return
        at = row.at
        length = 8
        if layer == EXTENSION_HEADER:
            length = 8 + 8 * u8(at + 1)
        elif layer == AUTHENTICATION_HEADER:
            length = 8 + 4 * u8(at + 1)
        elif u16(at + 2) & 0xFFF9:
            row.layer = FRAGMENT
            return
        else:  # a fragment that is the whole datagram (RFC 6946, from memory)
            row.ip_id = u16(at + 6)
        if _lacks(row, length):
            return
        protocol = u8(at)
        row.at = at + length


@kernel
def network_headers(rows: Rows, protocols: LayerTable) -> None:
    """Move every row at an IP header to what it carries, IP within IP included."""
    for index in range(len(rows)):
        row = rows[index]
        while row.layer == IPV4 or row.layer == IPV6:
            if row.depth >= MAX_DEPTH:
                row.layer = TOO_DEEP
            elif not _lacks(row, np.int64(20)):
                row.depth += 1
                protocol = _ipv4(row) if row.layer == IPV4 else _ipv6(row)
                if protocol >= 0:
                    _after_ip(row, protocol, protocols)
