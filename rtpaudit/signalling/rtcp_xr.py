"""RTCP extended reports (RFC 3611): octets of a packet in, report blocks out."""

import struct
from collections.abc import Callable
from dataclasses import dataclass

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.rtcp_voip import VoipMetrics

BLOCK_HEADER = 4


@dataclass(frozen=True, slots=True)
class Refused:
    """A packet or block whose frame is sound and whose content is not."""

    kind: int
    """packet type, or block type within an extended report"""
    fault: str


@dataclass(frozen=True, slots=True)
class RunLengths:
    """Loss or duplicate RLE report block (sections 4.1 and 4.2): one event per sequence number."""

    ssrc: int
    duplicates: bool
    """the block tells of duplicates, not of losses"""
    thinning: int
    """only numbers that are multiples of 2 to this power are told of"""
    begin: int
    end: int
    """one past the last number"""
    events: tuple[bool, ...]
    """true where the packet was received, or was received once only"""

    @property
    def sequence(self) -> list[int]:
        """The number of each event."""
        return [number & 0xFFFF for number in _reported(self.begin, self.end, self.thinning)]


@dataclass(frozen=True, slots=True)
class ReceiptTimes:
    """Packet receipt times report block (section 4.3)."""

    ssrc: int
    thinning: int
    begin: int
    end: int
    times: tuple[int, ...]
    """in ticks of the RTP clock"""


@dataclass(frozen=True, slots=True)
class ReceiverReferenceTime:
    """Receiver reference time report block (section 4.4)."""

    ntp: int
    """64 bits; 0 where the sender has no clock"""

    @property
    def ntp_middle(self) -> int:
        """What a ``LastReceiverReport`` repeats."""
        return self.ntp >> 16 & 0xFFFFFFFF


@dataclass(frozen=True, slots=True)
class LastReceiverReport:
    """A sub-block of the DLRR report block (section 4.5)."""

    ssrc: int
    last_rr: int
    """middle 32 bits of the reference time received last, 0 where there was none"""
    delay_since_last_rr: int
    """in 1/65536 s"""


@dataclass(frozen=True, slots=True)
class LastReceiverReports:
    """DLRR report block (section 4.5)."""

    receivers: tuple[LastReceiverReport, ...]


@dataclass(frozen=True, slots=True)
class StatisticsSummary:
    """Statistics summary report block (section 4.6); None for what its flags leave out."""

    ssrc: int
    begin: int
    end: int
    lost: int | None
    duplicated: int | None
    jitter: tuple[int, int, int, int] | None
    """minimum, maximum, mean and deviation, in ticks of the RTP clock"""
    ttl: tuple[int, int, int, int] | None
    """the same of time to live, or of hop limit"""
    hop_limit: bool
    """``ttl`` speaks of IPv6"""


@dataclass(frozen=True, slots=True)
class OtherBlock:
    """A block of another type."""

    block_type: int
    octets: bytes


Block = (
    RunLengths
    | ReceiptTimes
    | ReceiverReferenceTime
    | LastReceiverReports
    | StatisticsSummary
    | VoipMetrics
    | OtherBlock
    | Refused
)


@dataclass(frozen=True, slots=True)
class ExtendedReport:
    """XR (RFC 3611 section 2)."""

    ssrc: int
    blocks: tuple[Block, ...]

    @classmethod
    def parse(cls, _count: int, body: bytes) -> "ExtendedReport":
        """Sections 2 and 3, without the first four octets."""
        if len(body) < 4:
            raise MalformedPacket(f"RTCP extended report has {len(body)} octets up to its SSRC, needs 4")
        blocks = []
        at = 4
        while at < len(body):
            if at + BLOCK_HEADER > len(body):
                raise MalformedPacket(f"RTCP XR block header has {len(body) - at} octets, needs {BLOCK_HEADER}")
            kind, specific, words = struct.unpack_from("!BBH", body, at)
            content = body[at + BLOCK_HEADER : at + BLOCK_HEADER + 4 * words]
            if len(content) < 4 * words:
                raise MalformedPacket(f"RTCP XR block of type {kind} has {len(content)} octets, needs {4 * words}")
            blocks.append(_parse_block(kind, specific, content))
            at += BLOCK_HEADER + len(content)
        return cls(struct.unpack_from("!I", body)[0], tuple(blocks))


def _parse_block(kind: int, specific: int, content: bytes) -> Block:
    if kind not in PARSERS:
        return OtherBlock(kind, content)
    name, need, parse = PARSERS[kind]
    try:
        if len(content) < need:
            raise MalformedPacket(f"RTCP XR {name} block has {len(content)} octets, needs {need}")
        return parse(specific, content)
    except MalformedPacket as fault:
        return Refused(kind, str(fault))


def _reported(begin: int, end: int, thinning: int) -> range:
    """Numbers from begin to end, the latter left out, that are multiples of 2 to the thinning; may pass 65535."""
    step = 1 << thinning
    return range((begin + step - 1) // step * step, begin + (end - begin) % 65536, step)


def _run_lengths(specific: int, content: bytes, duplicates: bool = False) -> RunLengths:
    """Sections 4.1.1 to 4.1.3. Bits behind the last number are ignored, as the RFC has it."""
    ssrc, begin, end = struct.unpack_from("!IHH", content)
    thinning = specific & 15
    wanted = len(_reported(begin, end, thinning))
    events: list[bool] = []
    for (chunk,) in struct.iter_unpack("!H", content[8:]):
        if len(events) >= wanted:
            break
        if chunk & 0x8000:
            events += [bool(chunk >> bit & 1) for bit in range(14, -1, -1)]
        else:
            events += [bool(chunk & 0x4000)] * min(chunk & 0x3FFF, wanted - len(events))
    if len(events) < wanted:
        name = "duplicate" if duplicates else "loss"
        raise MalformedPacket(f"RTCP XR {name} RLE block tells of {len(events)} packets, its range needs {wanted}")
    return RunLengths(ssrc, duplicates, thinning, begin, end, tuple(events[:wanted]))


def _duplicate_run_lengths(specific: int, content: bytes) -> RunLengths:
    return _run_lengths(specific, content, duplicates=True)


def _receipt_times(specific: int, content: bytes) -> ReceiptTimes:
    """Section 4.3."""
    ssrc, begin, end = struct.unpack_from("!IHH", content)
    thinning = specific & 15
    wanted = len(_reported(begin, end, thinning))
    held = len(content) // 4 - 2
    if held < wanted:
        raise MalformedPacket(f"RTCP XR receipt times block tells of {held} packets, its range needs {wanted}")
    return ReceiptTimes(ssrc, thinning, begin, end, struct.unpack_from(f"!{wanted}I", content, 8))


def _reference_time(_specific: int, content: bytes) -> ReceiverReferenceTime:
    """Section 4.4."""
    return ReceiverReferenceTime(struct.unpack_from("!Q", content)[0])


def _last_receiver_reports(_specific: int, content: bytes) -> LastReceiverReports:
    """Section 4.5."""
    if len(content) % 12:
        raise MalformedPacket(f"RTCP XR DLRR block has {len(content)} octets, needs a multiple of 12")
    return LastReceiverReports(tuple(LastReceiverReport(*words) for words in struct.iter_unpack("!3I", content)))


def _statistics(specific: int, content: bytes) -> StatisticsSummary:
    """Section 4.6."""
    ssrc, begin, end, lost, duplicated, *jitter = struct.unpack_from("!IHH6I", content)
    ttl = tuple(content[32:36])
    if specific & 0x18 == 0x18:
        raise MalformedPacket("RTCP XR statistics block has 3 for its kind of time to live, which means nothing")
    told = (specific & 0x80, specific & 0x40, specific & 0x20, specific & 0x18)
    for flag, numbers, name in zip(told, ((lost,), (duplicated,), jitter, ttl), NAMES_OF_STATISTICS, strict=True):
        if not flag and any(numbers):
            raise MalformedPacket(f"RTCP XR statistics block gives {name} that its flags leave out")
    return StatisticsSummary(
        ssrc,
        begin,
        end,
        lost if told[0] else None,
        duplicated if told[1] else None,
        (jitter[0], jitter[1], jitter[2], jitter[3]) if told[2] else None,
        (ttl[0], ttl[1], ttl[2], ttl[3]) if told[3] else None,
        hop_limit=told[3] == 0x10,
    )


NAMES_OF_STATISTICS = ("losses", "duplicates", "jitter", "times to live")


PARSERS: dict[int, tuple[str, int, Callable[[int, bytes], Block]]] = {
    1: ("loss RLE", 8, _run_lengths),
    2: ("duplicate RLE", 8, _duplicate_run_lengths),
    3: ("receipt times", 8, _receipt_times),
    4: ("receiver reference time", 8, _reference_time),
    5: ("DLRR", 0, _last_receiver_reports),
    6: ("statistics", 36, _statistics),
    7: ("VoIP metrics", 32, VoipMetrics.parse),
}
