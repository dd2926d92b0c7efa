"""ICMP and ICMPv6 errors and the datagrams that they quote: packets come in, one row per error goes out."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from rtpaudit.decode.packets import Kind, Packets, address_text

MOST_ERRORS = 10_000
"""Errors read in one batch. A flood of them says nothing that the first ten thousand do not."""

ICMP, ICMP_V6 = 1, 58

ERRORS = {ICMP: (3, 4, 5, 11, 12), ICMP_V6: (1, 2, 3, 4)}
"""Types that quote a datagram (RFC 792; RFC 4443, 2.1; from memory)."""

PORT_UNREACHABLE = {(ICMP, 3, 3), (ICMP_V6, 1, 4)}
"""Protocol, type and code: nothing listens on the port (RFC 792; RFC 4443, 3.1; from memory)."""


@dataclass(frozen=True, slots=True)
class IcmpError:
    """One error, and the datagram on whose account it was sent."""

    frame: int
    time_ns: int
    flow: int
    """of the ICMP message: its source is the host that complains"""
    type: int
    code: int
    port_unreachable: bool
    protocol: int
    """of the quoted datagram: 17 for UDP, 6 for TCP"""
    source: str
    source_port: int
    destination: str
    destination_port: int


def quoted(packets: Packets, most: int = MOST_ERRORS) -> Iterator[IcmpError]:
    """The errors of a batch whose quotation names a UDP or TCP port; others are passed over."""
    for row in np.flatnonzero(packets.kind == Kind.ICMP)[:most].tolist():
        start = int(packets.start[row])
        message = packets.octets[start : start + min(int(packets.captured[row]), 128)].tobytes()
        found = _error(message)
        if found is not None:
            yield IcmpError(int(packets.frame[row]), int(packets.time_ns[row]), int(packets.flow[row]), *found)


def _error(message: bytes) -> tuple[int, int, bool, int, str, int, str, int] | None:
    """Type, code, whether a port is unreachable, and the quoted packet (RFC 792; RFC 4443, 3; from memory)."""
    if len(message) < 28:
        return None
    version = message[8] >> 4
    around = ICMP if version == 4 else ICMP_V6
    if version not in (4, 6) or message[0] not in ERRORS[around]:
        return None
    quotation = _addresses(message[8:], version)
    if quotation is None:
        return None
    return message[0], message[1], (around, message[0], message[1]) in PORT_UNREACHABLE, *quotation


def _addresses(packet: bytes, version: int) -> tuple[int, str, int, str, int] | None:
    """Protocol, addresses and ports of a quoted packet."""
    header, protocol, first, size = (4 * (packet[0] & 15), packet[9], 12, 4) if version == 4 else (40, packet[6], 8, 16)
    if protocol not in (6, 17) or len(packet) < header + 4 or header < 20:
        return None
    if version == 4 and int.from_bytes(packet[6:8], "big") & 0x1FFF:
        return None  # a later fragment has no ports
    source, destination = (
        address_text(np.frombuffer(packet[place : place + size].ljust(16, b"\0"), np.uint8), version)
        for place in (first, first + size)
    )
    ports = (int.from_bytes(packet[header + place : header + place + 2], "big") for place in (0, 2))
    source_port, destination_port = ports
    return protocol, source, source_port, destination, destination_port
