"""One frame of every encapsulation, by name: link type and octets. All but a few carry the same UDP datagram."""

import struct

from tests.craft import A6, B6, ethernet, ipv4, ipv6, rtp, tcp, udp

SOUND = rtp(sequence=7, timestamp=1120)
DATAGRAM = udp(SOUND, 4000, 4002)
FOUR = ipv4(DATAGRAM, dscp=46, ttl=61, identification=0x1234)
SIX = ipv6(DATAGRAM, dscp=46, hop_limit=61)


def cooked(protocol: int, payload: bytes, hardware: int = 1) -> bytes:
    """Linux cooked capture, version 1."""
    return struct.pack("!HHH8sH", 0, hardware, 6, b"\x02\0\0\0\0\x01", protocol) + payload


def cooked_2(protocol: int, payload: bytes, hardware: int = 1) -> bytes:
    """Linux cooked capture, version 2."""
    return struct.pack("!HHIHBB8s", protocol, 0, 3, hardware, 0, 6, b"\x02\0\0\0\0\x01") + payload


def label(value: int, bottom: bool) -> bytes:
    """One MPLS label stack entry."""
    return struct.pack("!I", value << 12 | bottom << 8 | 64)


def pppoe(protocol: bytes, payload: bytes) -> bytes:
    """PPPoE session header with PPP protocol and payload."""
    return struct.pack("!BBHH", 0x11, 0, 1, len(protocol) + len(payload)) + protocol + payload


def options_header(next_header: int, octets: int = 8) -> bytes:
    """Hop-by-hop or destination options filled with one padding option."""
    return bytes([next_header, octets // 8 - 1, 1, octets - 4]) + bytes(octets - 4)


def snap(ether_type: int, payload: bytes) -> bytes:
    """Ethernet with an 802.3 length, LLC and SNAP."""
    body = b"\xaa\xaa\x03\0\0\0" + struct.pack("!H", ether_type) + payload
    return ethernet(body, ether_type=len(body))


def gre(flags: int, ether_type: int, optional: bytes, payload: bytes) -> bytes:
    """GRE in IPv4."""
    return ipv4(struct.pack("!HH", flags, ether_type) + optional + payload, "198.51.100.1", "198.51.100.2", protocol=47)


def outer(payload: bytes, port: int) -> bytes:
    """Ethernet, IPv4 and UDP of a tunnel's ends."""
    return ethernet(ipv4(udp(payload, 50000, port), "198.51.100.1", "198.51.100.2", identification=9))


def gtp_u(flags: int, optional: bytes, payload: bytes) -> bytes:
    """GTP-U with a user's packet."""
    rest = optional + payload
    return struct.pack("!BBHI", 0x30 | flags, 255, len(rest), 77) + rest


def fragment_header(next_header: int, offset: int, more: bool, identification: int) -> bytes:
    """IPv6 fragment header; ``offset`` in octets."""
    return struct.pack("!BBHI", next_header, 0, offset | more, identification)


RADIO = b"\0\0\x08\0\0\0\0\0" + b"\x08\x02\0\0" + bytes(18) + b"\0\0" + b"\xaa\xaa\x03\0\0\0\x08\0"
INNER = ethernet(FOUR)

SPECIMENS: dict[str, tuple[int, bytes]] = {
    "Ethernet and IPv4": (1, ethernet(FOUR)),
    "Ethernet and IPv6": (1, ethernet(SIX, 0x86DD)),
    "a VLAN tag": (1, ethernet(FOUR, vlans=[100])),
    "two VLAN tags": (1, ethernet(FOUR, vlans=[100, 200])),
    "a provider tag and a VLAN tag": (1, ethernet(b"\0\xc8\x08\0" + FOUR, 0x8100, vlans=[100], tag=0x88A8)),
    "a priority tag inside a VLAN tag": (1, ethernet(FOUR, vlans=[100, 0xE000])),
    "Linux cooked, version 1": (113, cooked(0x0800, FOUR)),
    "Linux cooked with IPv6": (113, cooked(0x86DD, SIX)),
    "Linux cooked with a VLAN tag": (113, cooked(0x8100, b"\0\x64\x08\0" + FOUR)),
    "Linux cooked, version 2": (276, cooked_2(0x0800, FOUR)),
    "raw IPv4": (101, FOUR),
    "raw IPv6": (101, SIX),
    "PPP": (9, b"\0\x21" + FOUR),
    "PPP with its HDLC address": (9, b"\xff\x03\0\x21" + FOUR),
    "PPP with a short protocol": (9, b"\x21" + FOUR),
    "PPP with its HDLC address and a short protocol": (50, b"\xff\x03\x57" + SIX),
    "PPP over Ethernet": (1, ethernet(pppoe(b"\0\x21", FOUR), 0x8864)),
    "PPP over Ethernet with a short protocol": (1, ethernet(pppoe(b"\x57", SIX), 0x8864, vlans=[7])),
    "an MPLS label": (1, ethernet(label(16, True) + FOUR, 0x8847)),
    "three MPLS labels": (1, ethernet(label(16, False) + label(17, False) + label(18, True) + SIX, 0x8847)),
    "a pseudo-wire with its control word": (1, ethernet(label(16, True) + bytes(4) + INNER, 0x8847)),
    "SNAP": (1, snap(0x0800, FOUR)),
    "IPv4 options": (1, ethernet(ipv4(DATAGRAM, options=b"\x94\x04\0\0", ttl=61))),
    "a hop-by-hop header": (1, ethernet(ipv6(options_header(17, 16) + DATAGRAM, next_header=0), 0x86DD)),
    "hop-by-hop and destination options": (
        1,
        ethernet(ipv6(options_header(60) + options_header(17) + DATAGRAM, next_header=0), 0x86DD),
    ),
    "a routing header": (1, ethernet(ipv6(bytes([17, 0, 0, 0, 0, 0, 0, 0]) + DATAGRAM, next_header=43), 0x86DD)),
    "an IPv6 fragment that is whole": (
        1,
        ethernet(ipv6(fragment_header(17, 0, False, 0xABCD1234) + DATAGRAM, next_header=44), 0x86DD),
    ),
    "an authentication header": (
        1,
        ethernet(ipv4(bytes([17, 4, 0, 0]) + bytes(20) + DATAGRAM, protocol=51, identification=5)),
    ),
    "TCP": (1, ethernet(ipv4(tcp(b"OPTIONS", 5060, 5062, 1), protocol=6))),
    "ICMP": (1, ethernet(ipv4(b"\x03\x03\0\0\0\0\0\0" + FOUR, protocol=1))),
    "ICMPv6": (1, ethernet(ipv6(b"\x01\x04\0\0\0\0\0\0" + SIX, next_header=58), 0x86DD)),
    "padding after the packet": (1, ethernet(ipv4(udp(b"tiny")) + bytes(14))),
    "IP in IP": (1, ethernet(ipv4(FOUR, "198.51.100.1", "198.51.100.2", protocol=4))),
    "IPv6 in IPv4": (1, ethernet(ipv4(SIX, "198.51.100.1", "198.51.100.2", protocol=41))),
    "IPv4 in IPv6": (1, ethernet(ipv6(FOUR, A6, B6, next_header=4), 0x86DD)),
    "GRE": (1, ethernet(gre(0, 0x0800, b"", FOUR))),
    "GRE with checksum, key and sequence": (1, ethernet(gre(0xB000, 0x86DD, bytes(12), SIX))),
    "GRE with Ethernet": (1, ethernet(gre(0x2000, 0x6558, bytes(4), ethernet(FOUR, vlans=[300])))),
    "a mirror session without header": (1, ethernet(gre(0, 0x88BE, b"", INNER))),
    "a mirror session of type II": (1, ethernet(gre(0x1000, 0x88BE, bytes(4) + b"\x10" + bytes(7), INNER))),
    "VXLAN": (1, outer(b"\x08\0\0\0\0\0\x07\0" + INNER, 4789)),
    "Geneve": (1, outer(b"\x01\0\x65\x58\0\0\x07\0" + b"\x01\x02\x03\0" + INNER, 6081)),
    "GTP-U": (1, outer(gtp_u(0, b"", FOUR), 2152)),
    "GTP-U with a sequence number": (1, outer(gtp_u(2, b"\0\x01\0\0", FOUR), 2152)),
    "GTP-U with an extension header": (1, outer(gtp_u(4, b"\0\0\0\x85\x01\x10\0\0", SIX), 2152)),
    "radiotap": (127, RADIO + FOUR),
    "an EtherType for backbone bridges": (1, ethernet(b"\0\0\0\x07" + ethernet(FOUR, vlans=[9]), 0x88E7)),
}

CARRIERS: dict[str, tuple[int, bytes]] = {
    "BSD loopback, little-endian": (0, b"\x02\0\0\0" + FOUR),
    "BSD loopback, big-endian": (0, b"\0\0\0\x02" + FOUR),
    "BSD loopback with IPv6 of macOS": (0, b"\x1e\0\0\0" + SIX),
    "BSD loopback with IPv6 of FreeBSD, big-endian": (108, b"\0\0\0\x1c" + SIX),
    "raw IP of some BSDs": (12, FOUR),
    "raw IP of OpenBSD": (14, SIX),
    "IPv4 only": (228, FOUR),
    "IPv6 only": (229, SIX),
    "PPP over Ethernet without Ethernet": (51, pppoe(b"\0\x21", FOUR)),
    "serial HDLC with an EtherType": (104, b"\x0f\0\x08\0" + FOUR),
    "the same to many": (50, b"\x8f\0\x86\xdd" + SIX),
    "MPLS without Ethernet": (219, label(16, True) + FOUR),
    "PPP with an MPLS label": (9, b"\x02\x81" + label(16, True) + FOUR),
    "an old outer VLAN tag": (1, ethernet(b"\0\x64\x08\0" + FOUR, 0x9100)),
    "SNAP inside a VLAN tag": (1, ethernet(b"\0\x64" + snap(0x0800, FOUR)[12:], 0x8100)),
    "Ethernet inside Ethernet": (1, ethernet(ethernet(FOUR), 0x6558)),
}

UNKNOWN_TO_SCAPY = {"PPP with an MPLS label", "an old outer VLAN tag", "Ethernet inside Ethernet"}
