"""Which reports speak of which stream: report blocks, sender reports and reference times sorted by SSRC and by end."""

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.media.streams import Stream
from rtpaudit.metrics.reports import BetweenReports
from rtpaudit.signalling.reports import RtcpDatagram
from rtpaudit.signalling.rtcp import ReceiverReport, ReportBlock, SenderReport
from rtpaudit.signalling.rtcp_voip import VoipMetrics
from rtpaudit.signalling.rtcp_xr import ExtendedReport, LastReceiverReports, ReceiverReferenceTime
from rtpaudit.units import NS_PER_S

NAN = float("nan")
Floats = NDArray[np.float64]
BEFORE_NS, AFTER_NS = 10 * NS_PER_S, 60 * NS_PER_S
"""how long before its first and after its last packet a stream may be reported on"""


@dataclass(frozen=True, slots=True)
class Said:
    """One statement of a report about one SSRC."""

    time_ns: int
    source: str
    destination: str
    reporter: int
    """SSRC"""
    kind: str
    """``sender``, ``receiver`` or ``extended``"""
    block: ReportBlock | VoipMetrics


@dataclass(frozen=True, slots=True)
class Stamp:
    """A time stamp that the other side repeats: of a sender report, or a receiver reference time."""

    time_ns: int
    source: str
    middle: int


@dataclass(frozen=True, slots=True)
class Echoed:
    """The answer to a time stamp: last report and delay since."""

    time_ns: int
    source: str
    last: int
    delay: int


@dataclass(slots=True)
class About:
    """All that was said about one SSRC."""

    blocks: list[Said] = field(default_factory=list)
    metrics: list[Said] = field(default_factory=list)
    sent: list[Stamp] = field(default_factory=list)
    """sender reports of this SSRC"""
    references: list[Stamp] = field(default_factory=list)
    """receiver reference times of this SSRC"""
    echoed: list[Echoed] = field(default_factory=list)
    """answers to those references"""


@dataclass(frozen=True, slots=True)
class Trips:
    """Time stamps captured, and the answers to them, as columns."""

    sent_ns: NDArray[np.int64]
    middle: NDArray[np.uint32]
    time_ns: NDArray[np.int64]
    last: NDArray[np.uint32]
    delay: NDArray[np.uint32]


@dataclass(slots=True)
class FarEnd:
    """The reports on one stream, and what follows from them."""

    blocks: list[Said] = field(default_factory=list)
    between: BetweenReports | None = None
    set_aside: list[str] = field(default_factory=list)
    """why each block is not used, "" where it is"""
    captured_loss_pct: Floats = field(default_factory=lambda: np.empty(0))
    """what this capture misses of each interval"""
    half_trips_ms: Floats = field(default_factory=lambda: np.empty(0))
    """from the capture point to the receiver and back, at each block"""
    sender_trips_ms: Floats = field(default_factory=lambda: np.empty(0))
    """from the capture point to the sender and back"""
    metrics: list[Said] = field(default_factory=list)
    round_trip_ms: float = NAN
    reported_loss_pct: float = NAN
    reported_jitter_ms: float = NAN
    loss_before_pct: float = NAN
    loss_after_pct: float = NAN
    packets_reported: int = 0
    """packets that the loss figures speak of"""


class Reported:
    """The RTCP of one recording, by the SSRC that it speaks of."""

    def __init__(self, datagrams: Sequence[RtcpDatagram]) -> None:
        self._about: dict[int, About] = defaultdict(About)
        for datagram in datagrams:
            for packet in datagram.packets:
                self._sort(datagram, packet)

    def _sort(self, datagram: RtcpDatagram, packet: object) -> None:
        if isinstance(packet, SenderReport | ReceiverReport):
            kind = "sender" if isinstance(packet, SenderReport) else "receiver"
            for block in packet.blocks:
                self._about[block.ssrc].blocks.append(self._said(datagram, packet.ssrc, kind, block))
        if isinstance(packet, SenderReport) and packet.ntp:
            stamp = Stamp(datagram.time_ns, datagram.source, packet.ntp_middle)
            self._about[packet.ssrc].sent.append(stamp)
        if isinstance(packet, ExtendedReport):
            for one in packet.blocks:
                if isinstance(one, VoipMetrics):
                    self._about[one.ssrc].metrics.append(self._said(datagram, packet.ssrc, "extended", one))
                elif isinstance(one, ReceiverReferenceTime) and one.ntp:
                    stamp = Stamp(datagram.time_ns, datagram.source, one.ntp_middle)
                    self._about[packet.ssrc].references.append(stamp)
                elif isinstance(one, LastReceiverReports):
                    for echo in one.receivers:
                        answer = Echoed(datagram.time_ns, datagram.source, echo.last_rr, echo.delay_since_last_rr)
                        self._about[echo.ssrc].echoed.append(answer)

    @staticmethod
    def _said(datagram: RtcpDatagram, reporter: int, kind: str, block: ReportBlock | VoipMetrics) -> Said:
        return Said(datagram.time_ns, datagram.source, datagram.destination, reporter, kind, block)

    def blocks_on(self, stream: Stream) -> list[Said]:
        """Reception reports on a stream by its receiver, by time."""
        return self._of(stream, self._about[stream.ssrc].blocks) if stream.ssrc in self._about else []

    def metrics_on(self, stream: Stream) -> list[Said]:
        """Voice-quality blocks on a stream by its receiver, by time."""
        return self._of(stream, self._about[stream.ssrc].metrics) if stream.ssrc in self._about else []

    def blocks_from(self, host: str) -> list[Said]:
        """Reception reports that a host sent, on streams that were captured and on others, by time."""
        return sorted(
            (one for about in self._about.values() for one in about.blocks if one.source == host),
            key=lambda one: one.time_ns,
        )

    def _of(self, stream: Stream, said: Sequence[Said]) -> list[Said]:
        """Those that came from the stream's receiver to its sender; where the addresses tell nothing, from one host."""
        begin, end = int(stream.packets.time_ns[0]) - BEFORE_NS, int(stream.packets.time_ns[-1]) + AFTER_NS
        timely = [one for one in said if begin <= one.time_ns <= end]
        both = [one for one in timely if (one.source, one.destination) == (stream.destination, stream.source)]
        either = both or [one for one in timely if one.source == stream.destination or one.destination == stream.source]
        if not either and len({(one.source, one.destination) for one in timely}) == 1:
            either = timely
        return sorted(either, key=lambda one: one.time_ns)

    def trips_to_receiver(self, stream: Stream, blocks: Sequence[Said]) -> Trips:
        """Sender reports of a stream, and its receiver's answers."""
        stamps = [one for one in self._about[stream.ssrc].sent if one.source == stream.source]
        answers = [(one.time_ns, one.block) for one in blocks if isinstance(one.block, ReportBlock)]
        return _trips(stamps, [(at, block.last_sr, block.delay_since_last_sr) for at, block in answers])

    def trips_to_sender(self, stream: Stream, blocks: Sequence[Said]) -> Trips:
        """Reference times of a stream's receiver, and its sender's answers (RFC 3611, 4.4 and 4.5)."""
        reporters = {one.reporter for one in blocks}
        stamps = [one for ssrc in reporters for one in self._about[ssrc].references if one.source == stream.destination]
        answers = [one for ssrc in reporters for one in self._about[ssrc].echoed if one.source == stream.source]
        return _trips(stamps, [(one.time_ns, one.last, one.delay) for one in answers])


def _trips(stamps: Sequence[Stamp], answers: Sequence[tuple[int, int, int]]) -> Trips:
    return Trips(
        np.array([one.time_ns for one in stamps], np.int64),
        np.array([one.middle for one in stamps], np.uint32),
        np.array([one[0] for one in answers], np.int64),
        np.array([one[1] for one in answers], np.uint32),
        np.array([one[2] for one in answers], np.uint32),
    )
