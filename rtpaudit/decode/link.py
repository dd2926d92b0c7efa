"""Link types: where each path starts to read a frame.

A link type is one entry below: its LINKTYPE number, the layer at which the compiled path starts, and for the slow path
the name of the scapy class with the octet at which that class starts. Without a compiled path it starts at ``RARE``.
"""

from collections.abc import Callable
from dataclasses import dataclass

from rtpaudit.decode.layers import BY_VERSION, COOKED, COOKED_2, ETHERNET, LOOPBACK, MPLS, PPP, PPPOE, RARE

SlowEntry = tuple[str, int]
"""scapy class, and the octet of the frame at which it starts"""


@dataclass(frozen=True, slots=True)
class LinkType:
    """One link type as both paths take it."""

    number: int
    layer: int
    slow_entry: Callable[[bytes], SlowEntry]


LINK_TYPES: dict[int, LinkType] = {}


def link_type(
    *numbers: int, layer: int = RARE
) -> Callable[[Callable[[bytes], SlowEntry]], Callable[[bytes], SlowEntry]]:
    """Register the slow entry of one or more LINKTYPE numbers, and the layer at which the compiled path starts."""

    def register(slow_entry: Callable[[bytes], SlowEntry]) -> Callable[[bytes], SlowEntry]:
        for number in numbers:
            if number in LINK_TYPES:
                raise ValueError(f"link type {number} is registered twice")
            LINK_TYPES[number] = LinkType(number, layer, slow_entry)
        return slow_entry

    return register


@link_type(1, layer=ETHERNET)
def ethernet(_frame: bytes) -> SlowEntry:
    """Ethernet: EtherType, or an 802.3 length, in octets 13 and 14."""
    return "Ether", 0


@link_type(113, layer=COOKED)
def linux_cooked(_frame: bytes) -> SlowEntry:
    """Linux cooked capture, version 1: 16 octets, EtherType in the last two."""
    return "CookedLinux", 0


@link_type(276, layer=COOKED_2)
def linux_cooked_2(_frame: bytes) -> SlowEntry:
    """Linux cooked capture, version 2: 20 octets, EtherType in the first two."""
    return "CookedLinuxV2", 0


def names_ip(word: int) -> bool:
    """Whether an address family is IP's: 2 everywhere; for IPv6 10 Linux, 23 Windows, 24, 28, 30 the BSDs and macOS."""
    family = word if word < 65536 else (word >> 24) | ((word >> 8) & 0xFF00)
    return family == 2 or family == 10 or family == 23 or family == 24 or family == 28 or family == 30


@link_type(0, 108, layer=LOOPBACK)
def bsd_loopback(frame: bytes) -> SlowEntry:
    """BSD loopback: the address family of the capturing host in four octets, whose byte order is anyone's guess."""
    return ("IPv46" if names_ip(int.from_bytes(frame[:4], "big")) else "Raw"), 4


@link_type(12, 14, 101, 228, 229, layer=BY_VERSION)
def raw_ip(_frame: bytes) -> SlowEntry:
    """An IP header and nothing before it. Files of some hosts carry their own numbers 12 and 14 instead of 101."""
    return "IPv46", 0


@link_type(9, 50, 104, layer=PPP)
def point_to_point(frame: bytes) -> SlowEntry:
    """PPP, with or without its HDLC address (RFC 1662), or the HDLC of some routers with an EtherType."""
    return ("CHDLC" if frame[:2] in (b"\x0f\x00", b"\x8f\x00") else "PPP"), 0


@link_type(51, layer=PPPOE)
def ppp_over_ethernet(_frame: bytes) -> SlowEntry:
    """PPPoE session or discovery without the Ethernet header."""
    return "PPPoE", 0


@link_type(219, layer=MPLS)
def mpls(_frame: bytes) -> SlowEntry:
    """An MPLS label stack and what follows it."""
    return "MPLS", 0


@link_type(105)
def ieee_802_11(_frame: bytes) -> SlowEntry:
    """IEEE 802.11 frames."""
    return "Dot11", 0


@link_type(127)
def ieee_802_11_radiotap(_frame: bytes) -> SlowEntry:
    """IEEE 802.11 frames behind a radiotap header."""
    return "RadioTap", 0


def starting_layer(number: int) -> int:
    """Layer at which frames of a link type start; a number of which nothing is known may still be one of scapy's."""
    known = LINK_TYPES.get(number)
    return known.layer if known else RARE
