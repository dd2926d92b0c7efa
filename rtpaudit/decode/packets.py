"""What the decode room hands on: one row per UDP, TCP or ICMP packet, and the table of flows they belong to."""

from dataclasses import dataclass
from enum import IntEnum
from ipaddress import IPv4Address, IPv6Address

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Octets


class Kind(IntEnum):
    """What the first octets of a packet say it may be (RFC 7983 section 7, RFC 5761 section 4)."""

    OTHER = 0
    RTP = 1
    """UDP, version 2, 12 octets and the CSRC list fit, second octet outside 192 to 223"""
    RTCP = 2
    """UDP, version 2, second octet 192 to 223, at least 8 octets"""
    STUN = 3
    DTLS = 4
    ZRTP = 5
    TEXT = 6
    """UDP whose first octets are printable: SIP, MGCP, H.248 text"""
    TCP = 7
    ICMP = 8


@dataclass(frozen=True, slots=True)
class Packets:
    """A batch of packets in file order. All columns have shape (n,)."""

    octets: Octets
    """what ``start`` points into: the map of the file, or a buffer of datagrams put together from fragments"""
    frame: NDArray[np.int64]
    """number of the (last) frame that brought the packet, counted from 1 within the file"""
    time_ns: NDArray[np.int64]
    interface: NDArray[np.uint16]
    flow: NDArray[np.int32]
    """row of the ``Flows``"""
    kind: NDArray[np.uint8]
    """a ``Kind``"""
    start: NDArray[np.int64]
    """UDP: first octet of the payload; TCP and ICMP: first octet of their header"""
    length: NDArray[np.int32]
    """octets from ``start`` on by the IP and UDP lengths"""
    captured: NDArray[np.int32]
    """of these, the octets that the capture holds (fewer where a snap length cut)"""
    dscp: NDArray[np.uint8]
    ttl: NDArray[np.uint8]
    """time to live, or hop limit"""
    ip_id: NDArray[np.uint16]
    """IPv4 identification; 0 for IPv6 without fragments"""
    vlan: NDArray[np.uint16]
    """innermost VLAN identifier, 0 where untagged (the identifier 0 means "no VLAN" in IEEE 802.1Q)"""

    def __len__(self) -> int:
        return len(self.frame)


@dataclass(slots=True)
class Flows:
    """Distinct (protocol, source, destination) by first packet. Shape (flows,), addresses (flows, 16)."""

    source: NDArray[np.uint8]
    """16 octets each; IPv4 in the first four"""
    destination: NDArray[np.uint8]
    source_port: NDArray[np.uint16]
    """0 for ICMP"""
    destination_port: NDArray[np.uint16]
    version: NDArray[np.uint8]
    """4 or 6"""
    protocol: NDArray[np.uint8]
    """IANA number: 17 UDP, 6 TCP, 1 ICMP, 58 ICMPv6"""

    def __len__(self) -> int:
        return len(self.version)

    def source_text(self, flow: int) -> str:
        """Source address of a flow as people write it."""
        return address_text(self.source[flow], int(self.version[flow]))

    def destination_text(self, flow: int) -> str:
        """Destination address of a flow as people write it."""
        return address_text(self.destination[flow], int(self.version[flow]))


def address_text(octets: NDArray[np.uint8], version: int) -> str:
    """Text of an address kept in 16 octets (RFC 5952 for IPv6, from memory)."""
    raw = octets.tobytes()
    return str(IPv4Address(raw[:4])) if version == 4 else str(IPv6Address(raw))
