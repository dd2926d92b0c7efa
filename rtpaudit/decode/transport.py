"""UDP, TCP and ICMP headers, and what a UDP payload may be: rows at transport in, packets and UDP tunnels out."""

import numpy as np

from rtpaudit.decode.layers import (
    CUT,
    GENEVE,
    GRE,
    GTP_U,
    ICMP,
    LAST_LINK,
    MALFORMED,
    PACKET,
    RARE,
    TCP,
    UDP,
    VXLAN,
    Row,
    Rows,
)
from rtpaudit.decode.octets import Address, u8, u16, u32
from rtpaudit.decode.packets import Kind
from rtpaudit.kernels import inlined, kernel

OTHER = int(Kind.OTHER)
RTP = int(Kind.RTP)
RTCP = int(Kind.RTCP)
STUN = int(Kind.STUN)
DTLS = int(Kind.DTLS)
ZRTP = int(Kind.ZRTP)
TEXT = int(Kind.TEXT)
TCP_SEGMENT = int(Kind.TCP)
ICMP_MESSAGE = int(Kind.ICMP)

STUN_COOKIE = 0x2112A442
"""RFC 8489, 5 (from memory)."""

ZRTP_COOKIE = 0x5A525450
"""RFC 6189, 5 (from memory): the letters ZRTP."""

TEXT_OCTETS = 8
"""So many printable octets at the start make a text. Random octets do once in 2500 times; signalling looks closer."""


@inlined
def _is_text(at: Address, held: int) -> bool:
    """Whether the payload starts with printable ASCII or line ends, four octets at least."""
    if held < 4:
        return False
    for index in range(min(held, TEXT_OCTETS)):
        octet = u8(at + index)
        if not (32 <= octet < 127 or octet == 9 or octet == 10 or octet == 13):
            return False
    return True


@inlined
def _is_stun(at: Address, length: int, held: int) -> bool:
    """Whether a STUN header fits the payload (RFC 8489, 5). The older STUN has no cookie, but an exact length."""
    if length < 20 or held < 8:
        return False
    message = u16(at + 2)
    if message % 4 or 20 + message > length:
        return False
    return u32(at + 4) == STUN_COOKIE or 20 + message == length


@inlined
def _kind(at: Address, length: int, held: int) -> int:
    """Kind of a UDP payload by its first octets (RFC 7983, 7; RFC 5761, 4), of which the capture holds ``held``."""
    if held < 4:
        return OTHER
    first = u8(at)
    second = u8(at + 1)
    if 128 <= first < 192:
        if 192 <= second < 224:
            return RTCP if length >= 8 else OTHER
        return RTP if length >= 12 + 4 * np.int64(first & 15) else OTHER
    if _is_text(at, held):
        return TEXT
    if first < 4:
        return STUN if _is_stun(at, length, held) else OTHER
    if 16 <= first < 20:
        return ZRTP if held >= 8 and u32(at + 4) == ZRTP_COOKIE else OTHER
    if 20 <= first < 64:
        # DTLS up to 1.2 has its version next, 254 and up (RFC 6347, 4.1, from memory); 1.3 need not.
        return DTLS if first > 26 or second == 254 else OTHER
    return OTHER


@inlined
def _tunnel(at: Address, length: int, held: int) -> int:
    """Tunnel layer that begins at a UDP payload, by port and header; 0 for none."""
    if length < 16 or held < 8:
        return 0
    first = u8(at)
    source = u16(at - 8)
    destination = u16(at - 6)
    # RFC 7348, 5: only the I flag set, reserved octets 0. 8472 is the port of older hosts.
    if (destination == 4789 or destination == 8472) and u32(at) == 0x08000000 and u8(at + 7) == 0:
        return VXLAN
    # RFC 8926, 3.4: version 0, reserved octet 0, an EtherType
    if destination == 6081 and first < 64 and u8(at + 7) == 0 and u16(at + 2) >= 1536:
        return GENEVE
    # 3GPP TS 29.281, 5.1: version 1, protocol type 1, message 255 carries a user's packet
    if (source == 2152 or destination == 2152) and first >> 4 == 3 and u8(at + 1) == 255:
        return GTP_U
    return 0


@inlined
def _udp(row: Row) -> None:
    """UDP header (RFC 768). A length of 0 or beyond the IP payload gives way to the latter; checksums do not count."""
    length = u16(row.at + 4)
    if 0 < length < 8:
        row.layer = MALFORMED
        return
    if length:
        row.end = min(row.end, row.at + length)
    row.at += 8
    length = row.end - row.at
    held = min(row.end, row.limit) - row.at
    tunnel = _tunnel(row.at, length, held)
    row.layer = tunnel if tunnel else PACKET
    row.kind = _kind(row.at, length, held)


@kernel
def transport_headers(rows: Rows) -> int:
    """Turn every row at UDP, TCP or ICMP into a packet; how many are at a tunnel or a label, or to be treated aside."""
    aside = 0
    for index in range(len(rows)):
        row = rows[index]
        if UDP <= row.layer <= ICMP:
            needed = 20 if row.layer == TCP else 8
            if row.at + needed > row.end:
                row.layer = MALFORMED
            elif row.at + needed > row.limit:
                row.layer = CUT
            elif row.layer == UDP:
                _udp(row)
            else:
                row.kind = TCP_SEGMENT if row.layer == TCP else ICMP_MESSAGE
                row.layer = PACKET
        if row.layer <= LAST_LINK or GRE <= row.layer <= RARE:
            aside += 1
    return aside
