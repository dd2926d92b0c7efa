"""The slow path: frames that the compiled path cannot read go to scapy, one by one, which finds their IP header.

From there on they go the same way as all others. scapy is imported with the first such frame.
"""

import os
import struct
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any

from rtpaudit.decode.layers import IPV4, IPV6, MALFORMED, NOT_IP, SLOW_PATH_FULL, UNKNOWN_LINK
from rtpaudit.decode.link import LINK_TYPES

MOST_FRAMES = 200_000
"""Frames of one recording that scapy may see. It reads some thousand in a second."""

MOST_IN_VAIN = 2_000
"""So many frames of one EtherType without a single IP header among them, and the rest of it is left out."""

MOST_OF_LINK_IN_VAIN = 20_000
"""The same for a link type: radio captures may hold that many beacons before the first datagram."""

HEADERS = 512
"""Octets of a frame that scapy is given: enough for any headers before IP, and payloads are not its business here."""

# scapy refuses what it cannot read with all of these, wherever a field is shorter or stranger than it expects.
REFUSALS = (struct.error, ValueError, TypeError, LookupError, AttributeError, ArithmeticError, RuntimeError, OSError)

Found = tuple[int, int, int]
"""layer, octet of the frame where it starts, VLAN identifier"""


@contextmanager
def _without_folders() -> Iterator[None]:
    """Let scapy find no place for the settings and caches that it would lay out in the user's home on import."""
    names = ("XDG_CONFIG_HOME", "XDG_CACHE_HOME", "XDG_DATA_HOME")
    before = {name: os.environ.get(name) for name in names}
    os.environ.update(dict.fromkeys(names, os.devnull))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                del os.environ[name]
            else:
                os.environ[name] = value


def load_scapy() -> dict[str, Any]:
    """The scapy classes by name, imported without a word, without folders and without looking up routes."""
    import logging

    logging.getLogger("scapy").setLevel(logging.CRITICAL)
    with _without_folders():
        from scapy.config import conf

        conf.route_autoload = conf.route6_autoload = False
        from scapy.contrib import chdlc, mpls
        from scapy.layers import dot11, inet, inet6, l2, ppp
        from scapy.packet import Raw
    classes: dict[str, Any] = {"Raw": Raw}
    for module in (l2, inet, inet6, ppp, dot11, chdlc, mpls):
        classes.update(vars(module))
    return classes


@dataclass(slots=True)
class SlowPath:
    """What scapy was asked so far in one recording, so that the time it takes stays bounded."""

    left: int = MOST_FRAMES
    classes: dict[str, Any] = field(default_factory=dict)
    in_vain: Counter[tuple[int, int]] = field(default_factory=Counter)

    def find_ip(self, frame: bytes, link_type: int, sort: int) -> Found:
        """Where the IP header of a frame starts, or why the frame is left out.

        ``sort`` is the EtherType that the compiled path did not know, 0 where it did not get so far.
        """
        if self.in_vain[link_type, sort] >= (MOST_IN_VAIN if sort else MOST_OF_LINK_IN_VAIN):
            return NOT_IP, 0, 0
        if self.left == 0:
            return SLOW_PATH_FULL, 0, 0
        self.left -= 1
        if not self.classes:
            self.classes = load_scapy()
        found = self._dissect(frame[:HEADERS], link_type)
        if found[0] in (IPV4, IPV6):
            self.in_vain[link_type, sort] = -MOST_FRAMES
        else:
            self.in_vain[link_type, sort] += 1
        return found

    def _dissect(self, frame: bytes, link_type: int) -> Found:
        entry, start = self._entry(frame, link_type)
        if entry is None:
            return UNKNOWN_LINK, 0, 0
        versions = (self.classes["IP"], self.classes["IPv6"])
        try:
            layer = entry(frame[start:], stop_dissection_after=versions)
        except REFUSALS:
            return MALFORMED, 0, 0
        vlan, at = 0, start
        for _ in range(HEADERS):
            at = max(frame.find(layer.original, at), at)
            if isinstance(layer, versions):
                return (IPV4 if isinstance(layer, versions[0]) else IPV6), at, vlan
            if isinstance(layer, self.classes["Dot1Q"]):
                vlan = layer.vlan or vlan
            layer = layer.payload
            if not layer:
                break
        return NOT_IP, 0, 0

    def _entry(self, frame: bytes, link_type: int) -> tuple[Any, int]:
        """The scapy class that reads frames of a link type, with the octet at which it starts."""
        known = LINK_TYPES.get(link_type)
        if known is None:
            return self.classes["conf"].l2types.num2layer.get(link_type), 0
        name, start = known.slow_entry(frame)
        return self.classes[name], start
