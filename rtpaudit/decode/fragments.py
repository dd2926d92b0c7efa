"""IPv4 and IPv6 fragments put together: fragments in file order in, whole datagrams out, each as one IP packet again.

A datagram is complete with the fragment that fills its last hole, and carries that fragment's frame number and arrival.
As hosts do, a datagram with overlapping fragments is dropped whole (RFC 8200, 4.5, for IPv6; from memory), and exact
copies of a fragment are passed over.
"""

from bisect import bisect_left
from dataclasses import dataclass, field

from rtpaudit.units import NS_PER_S

MAX_AGE_NS = 30 * NS_PER_S
"""Hosts wait 15 to 120 s (RFC 791, 3.2; RFC 1122, 3.3.2; from memory). A busy sender's identification comes round."""

MAX_OPEN = 4096
"""Incomplete datagrams at a time."""

MAX_OCTETS = 64 << 20
"""Octets held of incomplete datagrams, the datagrams' own bookkeeping counted as 1024 each."""

MAX_DATAGRAM = 65_535
"""Longest IP packet (RFC 791, 3.1)."""

Key = tuple[int, bytes, int, int]
"""version, addresses, protocol (0 for IPv6), identification"""


Place = tuple[str, int]
"""capture and number of a frame"""


@dataclass(frozen=True, slots=True)
class Arrival:
    """What is kept of the frame that brought a fragment."""

    capture: str
    offset: int
    """octet of the file at which the frame starts"""
    frame: int
    time_ns: int
    interface: int
    vlan: int


@dataclass(frozen=True, slots=True)
class Fragment:
    """One fragment: where its octets belong in the datagram."""

    key: Key
    header: bytes
    """IP header and, for IPv6, all up to and with the fragment header"""
    first: int
    """octet of the datagram's payload"""
    length: int
    more: bool
    octets: bytes
    """what the capture holds of them"""


@dataclass(frozen=True, slots=True)
class Datagram:
    """A datagram put together: an IP packet as if it had never been cut."""

    octets: bytes
    """up to the first octet that a snap length took away"""
    original: int
    """octets that it had"""
    arrival: Arrival


@dataclass(slots=True)
class _Open:
    began: Arrival
    parts: list[tuple[int, int, bytes]] = field(default_factory=list)
    """first, length, octets; in order, without overlap"""
    header: bytes = b""
    total: int = -1
    """octets of the payload, -1 until the last fragment tells"""
    filled: int = 0
    """octets of the payload that the parts cover"""
    held: int = 1024
    spoilt: bool = False
    frames: list[Place] = field(default_factory=list)
    """those that brought fragments, where that is asked for"""

    def add(self, fragment: Fragment) -> None:
        """Put a fragment in its place, or spoil the datagram."""
        first, last = fragment.first, fragment.first + fragment.length
        place = bisect_left(self.parts, (first, 0, b""))
        if place < len(self.parts) and self.parts[place][:2] == (first, fragment.length):
            return
        before = self.parts[place - 1] if place else (0, 0, b"")
        overlaps = before[0] + before[1] > first or (place < len(self.parts) and self.parts[place][0] < last)
        beyond = 0 <= self.total < last or (not fragment.more and place < len(self.parts))
        if overlaps or beyond or (fragment.more and fragment.length % 8):
            self._spoil()
            return
        if not fragment.more:
            self.total = last
        if first == 0:
            self.header = fragment.header
        self.parts.insert(place, (first, fragment.length, fragment.octets))
        self.filled += fragment.length
        self.held += len(fragment.octets)
        if last + len(self.header) > MAX_DATAGRAM:
            self._spoil()

    def _spoil(self) -> None:
        self.spoilt = True
        self.parts.clear()

    def complete(self) -> bool:
        """Whether no hole is left: parts do not overlap, so their lengths add up."""
        return not self.spoilt and self.filled == self.total


def read_fragment(packet: bytes, length: int, version: int, header: int) -> Fragment | None:
    """A fragment from what the capture holds of an IP packet that was ``length`` octets long; None if malformed.

    ``header`` is the length of the IPv4 header (RFC 791, 3.1), or of all that stands before the IPv6 fragment header
    (RFC 8200, 4.5).
    """
    if version == 4:
        place = int.from_bytes(packet[6:8], "big")
        first, more = 8 * (place & 0x1FFF), bool(place & 0x2000)
        key = (4, packet[12:20], packet[9], int.from_bytes(packet[4:6], "big"))
    else:
        place = int.from_bytes(packet[header + 2 : header + 4], "big")
        first, more = place & 0xFFF8, bool(place & 1)
        key = (6, packet[8:40], 0, int.from_bytes(packet[header + 4 : header + 8], "big"))
        header += 8
    if length <= header:
        return None
    return Fragment(key, packet[:header], first, length - header, more, packet[header:length])


def _whole(version: int, header: bytes, payload: bytes, total: int) -> bytes:
    """The packet with its lengths set right and nothing in it that says fragment."""
    if version == 4:
        length = len(header) + total
        return header[:2] + length.to_bytes(2, "big") + header[4:6] + b"\0\0" + header[8:] + payload
    length = len(header) - 40 + total
    # The fragment header stays, as that of a datagram in one piece, because it holds the identification.
    return header[:4] + length.to_bytes(2, "big") + header[6:-6] + b"\0\0" + header[-4:] + payload


@dataclass(slots=True)
class Fragments:
    """The incomplete datagrams of a recording, oldest first."""

    opened: dict[Key, _Open] = field(default_factory=dict)
    done: dict[Key, int] = field(default_factory=dict)
    """when a datagram with this key was completed last; tells the copies that a mirror port makes"""
    held: int = 0
    lost: int = 0
    """datagrams given up"""
    first_lost: Arrival | None = None
    brought: dict[Place, list[Place]] | None = None
    """frames that brought the fragments of a datagram, by the frame that completed it; None where nobody asks"""

    def add(self, fragment: Fragment, arrival: Arrival) -> Datagram | None:
        """The datagram that this fragment completes, if it does."""
        self._give_up_old(arrival.time_ns)
        datagram = self.opened.get(fragment.key)
        if datagram is None:
            if len(self.opened) >= MAX_OPEN:
                self._give_up(next(iter(self.opened)))
            datagram = self.opened[fragment.key] = _Open(arrival)
            self.held += datagram.held
        if self.brought is not None:
            datagram.frames.append((arrival.capture, arrival.frame))
        held = datagram.held
        if not datagram.spoilt:
            datagram.add(fragment)
        self.held += datagram.held - held
        if not datagram.complete():
            return None
        self._close(fragment.key)
        if self.brought is not None:
            self.brought.setdefault((arrival.capture, arrival.frame), []).extend(datagram.frames)
        self.done.pop(fragment.key, None)
        self.done[fragment.key] = arrival.time_ns
        if len(self.done) > MAX_OPEN:
            del self.done[next(iter(self.done))]
        return _put_together(fragment.key[0], datagram, arrival)

    def give_up_all(self) -> None:
        """Count what is still incomplete as lost."""
        while self.opened:
            self._give_up(next(iter(self.opened)))

    def _give_up_old(self, now_ns: int) -> None:
        while self.opened:
            key, oldest = next(iter(self.opened.items()))
            if self.held < MAX_OCTETS and now_ns - oldest.began.time_ns <= MAX_AGE_NS:
                return
            self._give_up(key)

    def _give_up(self, key: Key) -> None:
        datagram = self._close(key)
        completed = self.done.get(key)
        if completed is not None and abs(datagram.began.time_ns - completed) <= MAX_AGE_NS:
            return  # stray copies of a datagram that did arrive
        self.lost += 1
        self.first_lost = self.first_lost or datagram.began

    def _close(self, key: Key) -> _Open:
        datagram = self.opened.pop(key)
        self.held -= datagram.held
        return datagram


def _put_together(version: int, datagram: _Open, arrival: Arrival) -> Datagram:
    payload = bytearray()
    for _, length, octets in datagram.parts:
        payload += octets
        if len(octets) < length:
            break
    octets = _whole(version, datagram.header, bytes(payload), datagram.total)
    return Datagram(octets, len(datagram.header) + datagram.total, arrival)
