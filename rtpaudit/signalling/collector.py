"""Packets of one recording come in, its signalling goes out: messages in order, calls, media terms, reports, damage."""

from dataclasses import dataclass, field

import numpy as np

from rtpaudit.capture.frames import Damage, Octets
from rtpaudit.decode.packets import Flows, Kind, Packets
from rtpaudit.decode.tcp import TcpChunk, TcpStreams
from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.calls import MediaTerm, SignallingMessage, SipCall
from rtpaudit.signalling.connections import Connection, may_carry_sip
from rtpaudit.signalling.dialogs import calls_of
from rtpaudit.signalling.framing import FramedMessage
from rtpaudit.signalling.gateway_control import GatewayControl
from rtpaudit.signalling.grammar import METHODS
from rtpaudit.signalling.h248 import looks_like_h248, parse_h248
from rtpaudit.signalling.mgcp import looks_like_mgcp, parse_mgcp
from rtpaudit.signalling.quality_reports import QualityReport
from rtpaudit.signalling.sightings import Reader, Sighting
from rtpaudit.signalling.sip import looks_like_sip, parse_message

MAX_DAMAGE = 1000
"""Rows of damage that are kept; a flood of broken messages is counted beyond."""


@dataclass(slots=True)
class Signalling:
    """What the endpoints of one recording said."""

    messages: list[SignallingMessage] = field(default_factory=list)
    """in time order"""
    calls: list[SipCall] = field(default_factory=list)
    """by their begin"""
    descriptions: list[MediaTerm] = field(default_factory=list)
    """media that gateways were told of (MGCP, H.248); they have no caller and no callee"""
    reports: list[QualityReport] = field(default_factory=list)
    """RFC 6035, in time order"""
    damage: list[Damage] = field(default_factory=list)


class SignallingCollector:
    """Collects the signalling of one recording, batch by batch."""

    def __init__(self) -> None:
        self._reader = Reader()
        self._control = GatewayControl()
        self._streams = TcpStreams(may_carry_sip)
        self._connections: dict[int, Connection] = {}
        self._places: dict[int, tuple[str, str]] = {}
        self._sightings: list[Sighting] = []
        self._messages: list[SignallingMessage] = []
        self._damage: list[Damage] = []
        self._damaged = 0
        self._flows: Flows | None = None
        self._map: Octets | None = None
        """of the present file: a batch over other octets was put together from fragments and has no place in it"""
        self._capture = ""

    def add(self, packets: Packets, flows: Flows, capture: str = "") -> None:
        """Takes the rows of kind TEXT and TCP of a batch of the file ``capture``; others are passed over."""
        if capture != self._capture or self._map is None:
            self._capture, self._map = capture, packets.octets
        self._flows = flows
        for row in np.flatnonzero(packets.kind == Kind.TEXT).tolist():
            self._datagram(packets, row)
        for chunk in self._streams.add(packets):
            self._segment(chunk, _offset_of_frame(packets, chunk.frame))

    def finish(self) -> Signalling:
        """Puts messages together to calls."""
        for chunk in self._streams.finish():
            self._segment(chunk, 0)
        for flow, connection in self._connections.items():
            self._framed(connection.flush(), flow, connection.transport, 0)
            if connection.skipped:
                what = f"{connection.skipped} octets without start line from {self._place(flow)[0]}"
                self._note(0, what, "the messages that they belong to")
        if self._damaged > MAX_DAMAGE:
            more = f"{self._damaged - MAX_DAMAGE} more damaged messages"
            self._damage.append(Damage(self._capture, 0, more, "not listed one by one"))
        self._messages.sort(key=lambda one: one.time_ns)
        calls = calls_of(self._sightings)
        for number, call in enumerate(calls):
            for message_of_call in call.messages:
                message_of_call.call = number
        reports = sorted(self._reader.reports, key=lambda one: one.time_ns)
        return Signalling(self._messages, calls, self._control.terms, reports, self._damage)

    def _segment(self, chunk: TcpChunk, offset: int) -> None:
        connection = self._connections.setdefault(chunk.flow, Connection())
        messages = connection.feed(chunk.octets, chunk.time_ns, chunk.frame, chunk.gap_before)
        self._framed(messages, chunk.flow, connection.transport, offset)

    def _framed(self, messages: list[FramedMessage], flow: int, transport: str, offset: int) -> None:
        for one in messages:
            row = self._row(flow, one.time_ns, one.frame, "SIP", transport)
            row.first_frame = one.first_frame
            self._sip(one.octets, row, one.whole, offset)

    def _datagram(self, packets: Packets, row: int) -> None:
        begin = int(packets.start[row])
        octets = packets.octets[begin : begin + int(packets.captured[row])].tobytes()
        whole = packets.captured[row] >= packets.length[row]
        offset = begin if packets.octets is self._map else 0
        flow, time_ns, frame = int(packets.flow[row]), int(packets.time_ns[row]), int(packets.frame[row])
        if looks_like_sip(octets):
            self._sip(octets, self._row(flow, time_ns, frame, "SIP", "UDP"), bool(whole), offset)
        elif looks_like_mgcp(octets):
            self._mgcp(octets, self._row(flow, time_ns, frame, "MGCP", "UDP"), offset)
        elif looks_like_h248(octets):
            self._h248(octets, self._row(flow, time_ns, frame, "H.248", "UDP"), offset)

    def _sip(self, octets: bytes, row: SignallingMessage, whole: bool, offset: int) -> None:
        try:
            message = parse_message(octets, whole)
        except MalformedPacket as error:
            self._note(offset, f"SIP message from {row.source}: {error}", "the message")
            return
        faults = list(message.faults)
        sighting = self._reader.sighting(message, self._reader.row(message, row), faults)
        self._messages.append(row)
        if sighting is not None:
            self._sightings.append(sighting)
        if faults:
            what = f"{_kind(row)} from {row.source}: {'; '.join(faults)[:300]}"
            self._note(offset, what, "nothing else of it")

    def _mgcp(self, octets: bytes, row: SignallingMessage, offset: int) -> None:
        try:
            messages = parse_mgcp(octets)
        except MalformedPacket as error:
            self._note(offset, f"from {row.source}: {error}", "the message")
            return
        # A response line is too short to tell by itself that it is one.
        if not messages[0].verb and not self._control.awaits(messages[0].transaction, row.destination):
            return
        for message in messages:
            made = _copy(row)
            self._control.mgcp(message, made)
            self._messages.append(made)
            if message.fault:
                self._note(offset, f"{_kind(made)} from {row.source}: {message.fault}", "the description in it")

    def _h248(self, octets: bytes, row: SignallingMessage, offset: int) -> None:
        try:
            message = parse_h248(octets)
        except MalformedPacket as error:
            self._note(offset, f"from {row.source}: {error}", "the message")
            return
        for transaction in message.transactions:
            made = _copy(row)
            faults = self._control.h248(message, transaction, made)
            self._messages.append(made)
            if faults:
                self._note(offset, f"H.248 from {row.source}: {'; '.join(faults)[:300]}", "the description in it")

    def _row(self, flow: int, time_ns: int, frame: int, protocol: str, transport: str) -> SignallingMessage:
        source, destination = self._place(flow)
        return SignallingMessage(
            time_ns, source, destination, protocol, transport, "", "", capture=self._capture, frame=frame, flow=flow
        )

    def _place(self, flow: int) -> tuple[str, str]:
        """Source and destination of a flow."""
        found = self._places.get(flow)
        if found is None:
            assert self._flows is not None
            flows = self._flows
            source = _place(flows.source_text(flow), int(flows.source_port[flow]))
            found = source, _place(flows.destination_text(flow), int(flows.destination_port[flow]))
            self._places[flow] = found
        return found

    def _note(self, offset: int, what: str, lost: str) -> None:
        self._damaged += 1
        if self._damaged <= MAX_DAMAGE:
            self._damage.append(Damage(self._capture, offset, what, lost))


def _kind(row: SignallingMessage) -> str:
    """What a message is, without a word of its own: damage is told where nobody is to be named, too."""
    if row.status_code is not None:
        return f"{row.protocol} {row.status_code}"
    return f"{row.protocol} {row.message}" if row.message in METHODS else f"{row.protocol} request"


def _place(address: str, port: int) -> str:
    return f"[{address}]:{port}" if ":" in address else f"{address}:{port}"


def _copy(row: SignallingMessage) -> SignallingMessage:
    return SignallingMessage(
        row.time_ns, row.source, row.destination, row.protocol, row.transport, "", "",
        capture=row.capture, frame=row.frame, flow=row.flow,
    )  # fmt: skip


def _offset_of_frame(packets: Packets, frame: int) -> int:
    row = int(np.searchsorted(packets.frame, frame))
    return int(packets.start[row]) if row < len(packets.frame) and packets.frame[row] == frame else 0
