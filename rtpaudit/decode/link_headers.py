"""What stands between the start of a frame and its IP header: rows at a link layer in, rows at an IP header out."""

import numpy as np

from rtpaudit.decode.layers import (
    BY_VERSION,
    COOKED,
    COOKED_2,
    CUT,
    ETHERNET,
    IPV4,
    IPV6,
    LAST_LINK,
    LLC,
    LOOPBACK,
    MALFORMED,
    MAX_DEPTH,
    MPLS,
    NOT_IP,
    PPP,
    PPPOE,
    RARE,
    TOO_DEEP,
    VLAN,
    LayerTable,
    Row,
    Rows,
)
from rtpaudit.decode.link import names_ip
from rtpaudit.decode.octets import u8, u16, u32
from rtpaudit.kernels import inlined, kernel

ETHERTYPES: dict[int, int] = {
    0x0800: IPV4,
    0x86DD: IPV6,
    0x6558: ETHERNET,
    0x8100: VLAN,
    0x88A8: VLAN,
    0x9100: VLAN,  # 0x9100 to 0x9300: outer tags before IEEE 802.1ad, common practice
    0x9200: VLAN,
    0x9300: VLAN,
    0x8847: MPLS,
    0x8848: MPLS,
    0x8864: PPPOE,
    0x880B: PPP,
}
"""IEEE EtherTypes that lead to IP."""

NOT_IP_ETHERTYPES = (
    *(0x0806, 0x8035, 0x80F3),  # address resolution: ARP, RARP, AppleTalk's
    *(0x8137, 0x8138, 0x809B, 0x6002, 0x6003, 0x6004),  # IPX, AppleTalk, DEC
    *(0x8808, 0x8809, 0x8902, 0x88CC, 0x893B, 0x9000),  # pause, slow protocols, fault management, LLDP, TRILL ECP, loop
    *(
        0x888E,
        0x88C7,
        0x8863,
        0x887B,
        0x88E1,
        0x8912,
        0x893A,
    ),  # 802.1X, pre-authentication, PPPoE discovery, power line
    *(0x88F7, 0x8892, 0x88A4, 0x88AB, 0x88B8, 0x88B9, 0x88BA, 0x88CD, 0x88E3),  # PTP and industrial buses
    *(0x8906, 0x8914, 0x8915, 0x88A2),  # storage
)
"""EtherTypes known to carry no IP (IEEE registry, from memory): not worth the slow path."""

PPP_PROTOCOLS = {0x0021: IPV4, 0x0057: IPV6, 0x0281: MPLS, 0x0283: MPLS}
"""IANA PPP data link layer protocol numbers that lead to IP (RFC 1332, RFC 5072, RFC 3032; from memory)."""


def _table(leading: dict[int, int], default: int) -> LayerTable:
    table = np.full(1 << 16, default, np.uint8)
    for number, layer in leading.items():
        table[number] = layer
    return table


def _ethertype_table() -> LayerTable:
    table = _table(ETHERTYPES | dict.fromkeys(NOT_IP_ETHERTYPES, NOT_IP), RARE)
    table[:1536] = LLC  # IEEE 802.3: below 1536 it is a length, and LLC follows
    return table


ETHERTYPE_TABLE = _ethertype_table()
PPP_TABLE = _table(PPP_PROTOCOLS, NOT_IP)


_names_ip = inlined(names_ip)


@inlined
def _point_to_point(row: Row, ethertypes: LayerTable, ppp_protocols: LayerTable) -> None:
    """PPP (RFC 1661, 2; RFC 1662, 3.1): address and control may be left out, and so may the first protocol octet."""
    first = u16(row.at)
    if first == 0x0F00 or first == 0x8F00:
        row.layer = ethertypes[u16(row.at + 2)]
        row.at += 4
        return
    if first == 0xFF03:
        row.at += 2
    if u8(row.at) & 1:
        row.layer = ppp_protocols[u8(row.at)]
        row.at += 1
    else:
        row.layer = ppp_protocols[u16(row.at)]
        row.at += 2


@inlined
def _label_stack_entry(row: Row) -> None:
    """One MPLS label (RFC 3032, 2.1). Nothing names what follows the last one: IP by its version, else Ethernet."""
    bottom = u8(row.at + 2) & 1
    row.at += 4
    if not bottom:
        return
    version = u8(row.at) >> 4
    if version == 4:
        row.layer = IPV4
    elif version == 6:
        row.layer = IPV6
    else:
        row.layer = ETHERNET
        if u16(row.at) == 0:  # RFC 4385, 3: a pseudo-wire may put a control word first, whose four first bits are 0
            row.at += 4


@inlined
def _step(row: Row, ethertypes: LayerTable, ppp_protocols: LayerTable) -> None:
    """Take one header off that is not Ethernet's; eight octets are there."""
    layer = row.layer
    if layer == VLAN:
        identifier = u16(row.at) & 0x0FFF
        if identifier:  # 0 is a priority tag, no VLAN
            row.vlan = identifier
        row.layer = ethertypes[u16(row.at + 2)]
        row.at += 4
    elif layer == COOKED:
        # Netlink messages (ARPHRD 824) put a family where the EtherType stands otherwise.
        row.layer = NOT_IP if u16(row.at + 2) == 824 else ethertypes[u16(row.at + 14)]
        row.at += 16
    elif layer == COOKED_2:
        row.layer = NOT_IP if u16(row.at + 8) == 824 else ethertypes[u16(row.at)]
        row.at += 20
    elif layer == PPPOE:  # RFC 2516, 4: version and type 1, code 0 in a session
        row.layer = PPP if u16(row.at) == 0x1100 else NOT_IP
        row.at += 6
    elif layer == PPP:
        _point_to_point(row, ethertypes, ppp_protocols)
    elif layer == MPLS:
        _label_stack_entry(row)
    elif layer == LOOPBACK:
        row.layer = BY_VERSION if _names_ip(u32(row.at)) else NOT_IP
        row.at += 4
    elif layer == LLC:
        # IEEE 802.2: only SNAP leads to an EtherType (RFC 1042); spanning tree and the like carry no IP.
        ethertype = u16(row.at + 6)
        snap = u16(row.at) == 0xAAAA and u32(row.at + 2) & 0xFFFFFF == 0 and ethertype >= 1536
        row.layer = ethertypes[ethertype] if snap else NOT_IP
        row.at += 8
    else:
        version = u8(row.at) >> 4
        row.layer = IPV4 if version == 4 else IPV6 if version == 6 else MALFORMED


@kernel
def link_headers(rows: Rows, ethertypes: LayerTable, ppp_protocols: LayerTable) -> None:
    """Move every row at a link layer to its IP header, or out."""
    for index in range(len(rows)):
        row = rows[index]
        while row.layer <= LAST_LINK:
            needed = 14 if row.layer == ETHERNET else 20 if row.layer == COOKED or row.layer == COOKED_2 else 8
            if row.at + needed > row.end:
                row.layer = MALFORMED
            elif row.at + needed > row.limit:
                row.layer = CUT
            elif row.depth == MAX_DEPTH:
                row.layer = TOO_DEEP
            else:
                row.depth += 1
                if row.layer == ETHERNET:
                    row.layer = ethertypes[u16(row.at + 12)]
                    row.at += 14
                else:
                    _step(row, ethertypes, ppp_protocols)
