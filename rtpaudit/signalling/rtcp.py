"""RTCP (RFC 3550 section 6): octets of a datagram in, reports, names and farewells out.

Compound packets and reduced-size ones (RFC 5506) read alike. What is framed well but does not hold what its header
promises becomes a ``Refused``, so that the other packets of the datagram are not lost with it.
"""

import struct
from collections.abc import Callable
from dataclasses import dataclass

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.grammar import printable
from rtpaudit.signalling.rtcp_xr import ExtendedReport, Refused
from rtpaudit.signalling.srtcp import TYPES, encryption, sound_end

HEADER = 4
REPORT_BLOCK = 24
SENDER_INFORMATION = 20
CNAME = 1


@dataclass(frozen=True, slots=True)
class ReportBlock:
    """One reception report block (section 6.4.1)."""

    ssrc: int
    fraction_lost: int
    """in 1/256, since the report before"""
    cumulative_lost: int
    """signed, 24 bits: negative when duplicates outnumber losses"""
    highest_sequence: int
    """extended by the reporter's own count of wraps"""
    jitter: int
    """in ticks of the RTP clock"""
    last_sr: int
    """middle 32 bits of the NTP time stamp of the last sender report, 0 where there was none"""
    delay_since_last_sr: int
    """in 1/65536 s"""

    @classmethod
    def parse(cls, octets: bytes) -> "ReportBlock":
        """Section 6.4.1."""
        if len(octets) < REPORT_BLOCK:
            raise MalformedPacket(f"RTCP report block has {len(octets)} octets, needs {REPORT_BLOCK}")
        ssrc, loss, highest, jitter, last_sr, delay = struct.unpack_from("!6I", octets)
        lost = loss & 0xFFFFFF
        return cls(ssrc, loss >> 24, lost - (lost >> 23 << 24), highest, jitter, last_sr, delay)


@dataclass(frozen=True, slots=True)
class SenderReport:
    """SR (section 6.4.1)."""

    ssrc: int
    ntp: int
    """64 bits, seconds since 1900 in the upper half; 0 where the sender has no clock"""
    rtp_timestamp: int
    packets: int
    octets: int
    blocks: tuple[ReportBlock, ...]

    @property
    def ntp_middle(self) -> int:
        """What report blocks repeat as ``last_sr``."""
        return self.ntp >> 16 & 0xFFFFFFFF

    @classmethod
    def parse(cls, count: int, body: bytes) -> "SenderReport":
        """Section 6.4.1, without the first four octets."""
        need = 4 + SENDER_INFORMATION
        if len(body) < need:
            raise MalformedPacket(f"RTCP sender report has {len(body)} octets up to its sender's counts, needs {need}")
        ssrc, ntp, timestamp, packets, sent = struct.unpack_from("!IQIII", body)
        return cls(ssrc, ntp, timestamp, packets, sent, _blocks("sender report", count, body[need:]))


@dataclass(frozen=True, slots=True)
class ReceiverReport:
    """RR (section 6.4.2)."""

    ssrc: int
    blocks: tuple[ReportBlock, ...]

    @classmethod
    def parse(cls, count: int, body: bytes) -> "ReceiverReport":
        """Section 6.4.2, without the first four octets."""
        return cls(_ssrc("receiver report", body), _blocks("receiver report", count, body[4:]))


@dataclass(frozen=True, slots=True)
class SourceNames:
    """One chunk of SDES (section 6.5): what a source says of itself."""

    ssrc: int
    items: tuple[tuple[int, str], ...]
    """kind of item and text, as it came"""

    @property
    def cname(self) -> str:
        """The canonical end-point identifier (section 6.5.1), empty where there is none."""
        return next((text for kind, text in self.items if kind == CNAME), "")


@dataclass(frozen=True, slots=True)
class SourceDescription:
    """SDES (section 6.5)."""

    chunks: tuple[SourceNames, ...]

    @classmethod
    def parse(cls, count: int, body: bytes) -> "SourceDescription":
        """Section 6.5. The last chunk may lack the null octet that ends it, as some gear has it."""
        chunks = []
        at = 0
        for number in range(count):
            if at + 4 > len(body):
                raise MalformedPacket(f"RTCP source description holds {number} chunks, its header promises {count}")
            (ssrc,) = struct.unpack_from("!I", body, at)
            items, at = _items(body, at + 4)
            chunks.append(SourceNames(ssrc, items))
        return cls(tuple(chunks))


@dataclass(frozen=True, slots=True)
class Goodbye:
    """BYE (section 6.6)."""

    ssrcs: tuple[int, ...]
    reason: str

    @classmethod
    def parse(cls, count: int, body: bytes) -> "Goodbye":
        """Section 6.6."""
        if len(body) < 4 * count:
            raise MalformedPacket(f"RTCP goodbye holds {len(body) // 4} sources, its header promises {count}")
        reason = body[4 * count :]
        if reason and len(reason) <= reason[0]:
            raise MalformedPacket(f"RTCP goodbye has {len(reason) - 1} octets of its reason, needs {reason[0]}")
        text = _text(reason[1 : 1 + reason[0]]) if reason else ""
        return cls(struct.unpack_from(f"!{count}I", body), text)


@dataclass(frozen=True, slots=True)
class Application:
    """APP (section 6.7)."""

    ssrc: int
    subtype: int
    name: str
    octets: bytes

    @classmethod
    def parse(cls, count: int, body: bytes) -> "Application":
        """Section 6.7."""
        if len(body) < 8:
            raise MalformedPacket(f"RTCP application packet has {len(body)} octets up to its name, needs 8")
        return cls(_ssrc("application packet", body), count, _text(body[4:8]), body[8:])


@dataclass(frozen=True, slots=True)
class OtherPacket:
    """A packet of another type, as feedback is (RFC 4585, from memory)."""

    packet_type: int
    count: int
    body: bytes


Packet = (
    SenderReport | ReceiverReport | SourceDescription | Goodbye | Application | ExtendedReport | OtherPacket | Refused
)

PARSERS: dict[int, Callable[[int, bytes], Packet]] = {
    200: SenderReport.parse,
    201: ReceiverReport.parse,
    202: SourceDescription.parse,
    203: Goodbye.parse,
    204: Application.parse,
    207: ExtendedReport.parse,
}
NAMES = {
    200: "sender report",
    201: "receiver report",
    202: "source description",
    203: "goodbye",
    204: "application packet",
    207: "extended report",
}


def parse_compound(octets: bytes, cut: bool = False) -> list[Packet]:
    """The packets of one datagram, in order (section 6.1, checks of A.2; RFC 5506: the first may be of any type).

    Parameters
    ----------
    octets : bytes
    cut : bool
        The capture holds but the beginning of the datagram: the packets that are whole are given. Whether they are
        encrypted cannot be told then.

    Raises
    ------
    MalformedPacket
        If the lengths do not add up to the datagram, or if it is encrypted (RFC 3711 section 3.4).
    """
    if not octets:
        raise MalformedPacket("RTCP datagram is empty")
    end = len(octets)
    if cut:
        end = sound_end(octets)
    elif secured := encryption(octets):
        if secured == "encrypted":
            raise MalformedPacket("RTCP datagram is encrypted (RFC 3711)")
        end = sound_end(octets)
    packets = []
    at = 0
    while at < end:
        length = _checked_length(octets, at)
        packets.append(_parse_packet(octets[at : at + length]))
        at += length
    return packets


def _checked_length(octets: bytes, at: int) -> int:
    """Octets of the packet at ``at``, after the checks of A.2."""
    left = len(octets) - at
    if left < HEADER:
        raise MalformedPacket(f"RTCP header has {left} octets, needs {HEADER}")
    first, kind, words = struct.unpack_from("!BBH", octets, at)
    if first >> 6 != 2:
        raise MalformedPacket(f"RTCP header has version {first >> 6}, needs 2")
    if kind not in TYPES:
        raise MalformedPacket(f"RTCP header has packet type {kind}, needs one from {TYPES[0]} to {TYPES[-1]}")
    length: int = HEADER + 4 * words
    if length > left:
        name = NAMES.get(kind, f"packet of type {kind}")
        raise MalformedPacket(f"RTCP {name} has {left} octets, its length field promises {length}")
    return length


def _parse_packet(octets: bytes) -> Packet:
    first, kind = octets[0], octets[1]
    try:
        body = _without_padding(octets[HEADER:]) if first & 0x20 else octets[HEADER:]
        if kind not in PARSERS:
            return OtherPacket(kind, first & 31, body)
        return PARSERS[kind](first & 31, body)
    except MalformedPacket as fault:
        return Refused(kind, str(fault))


def _without_padding(body: bytes) -> bytes:
    """Section 6.4.1: the last octet counts the padding, itself included."""
    if not body or not 0 < body[-1] <= len(body):
        raise MalformedPacket(f"RTCP padding counts {body[-1] if body else 0} octets, needs 1 to {len(body)}")
    return body[: -body[-1]]


def _ssrc(name: str, body: bytes) -> int:
    if len(body) < 4:
        raise MalformedPacket(f"RTCP {name} has {len(body)} octets up to its SSRC, needs 4")
    return int.from_bytes(body[:4], "big")


def _blocks(name: str, count: int, octets: bytes) -> tuple[ReportBlock, ...]:
    """So many report blocks; what follows them are extensions of a profile (section 6.4.3)."""
    if len(octets) < REPORT_BLOCK * count:
        held = len(octets) // REPORT_BLOCK
        raise MalformedPacket(f"RTCP {name} holds {held} report blocks, its header promises {count}")
    return tuple(ReportBlock.parse(octets[REPORT_BLOCK * row :]) for row in range(count))


def _items(body: bytes, at: int) -> tuple[tuple[tuple[int, str], ...], int]:
    """Items of a chunk, and where the next chunk begins: at the next multiple of four octets behind the null octet."""
    items = []
    while at < len(body) and body[at]:
        kind, length = body[at], body[at + 1] if at + 1 < len(body) else 0
        text = body[at + 2 : at + 2 + length]
        if at + 2 > len(body) or len(text) < length:
            raise MalformedPacket(f"RTCP source description item of type {kind} has {len(text)} octets, needs {length}")
        items.append((kind, _text(text)))
        at += 2 + length
    return tuple(items), (at // 4 + 1) * 4


def _text(octets: bytes) -> str:
    return printable(octets.decode("utf-8", "replace"))
