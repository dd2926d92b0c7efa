"""Finds the SIP messages in one direction of a TCP connection: bare (RFC 3261), or in WebSocket frames (RFC 7118)."""

from dataclasses import dataclass, field

from rtpaudit.signalling.framing import FramedMessage, MessageStream
from rtpaudit.signalling.grammar import METHODS
from rtpaudit.signalling.sip import looks_like_sip
from rtpaudit.signalling.websocket import WebSocketStream, first_payload, handshake_end

PATIENCE_OCTETS = 65_536
"""A direction in which this many octets hold no start line carries no SIP."""

ENOUGH_OCTETS = 16
"""so many are needed to tell a handshake or a frame; no message is shorter"""

_FIRST_OCTETS = 4200
_HANDSHAKES = (b"GET ", b"HTTP/1.1 101")
_TLS_RECORDS = (b"\x14\x03", b"\x15\x03", b"\x16\x03", b"\x17\x03")

_BEGINS = (b"SIP/2.0 ", *_HANDSHAKES, *(f"{method} ".encode() for method in sorted(METHODS)))


def may_carry_sip(first_octets: bytes) -> bool:
    """Whether a direction that begins so is worth following; few octets are enough."""
    begin = (first_payload(first_octets) or first_octets).lstrip(b"\r\n")[:16].upper()
    return any(begin.startswith(word[: len(begin)]) for word in _BEGINS) if begin else False


@dataclass(slots=True)
class Connection:
    """One direction of a TCP connection, told by its content."""

    transport: str = ""
    """TCP or WebSocket once SIP was found"""
    dropped: bool = False
    """True once it is known to carry something else"""
    _recognised: bool = False
    _first: bytearray = field(default_factory=bytearray)
    _bare: MessageStream = field(default_factory=MessageStream)
    _web: WebSocketStream | None = None
    _handshake: bytearray | None = None

    @property
    def skipped(self) -> int:
        """Octets that belong to no message, though others of the connection do."""
        return self._bare.skipped if self._bare.found else 0

    def feed(self, octets: bytes, time_ns: int, frame: int, gap_before: bool) -> list[FramedMessage]:
        """Messages that are complete with this chunk."""
        if self.dropped or not octets:
            return []
        if self._web is not None and octets.startswith(_HANDSHAKES):
            # Another connection between the same ports.
            self._web, self._recognised = None, False
        if not self._recognised:
            self._first += octets
            if len(self._first) < ENOUGH_OCTETS:
                return []
            octets, self._first = bytes(self._first), bytearray()
            self._recognise(octets[:_FIRST_OCTETS])
        if self._handshake is not None:
            self._handshake += octets
            octets = self._behind_handshake()
        if self._web is not None:
            return self._unwrapped(octets, time_ns, frame, gap_before)
        if self.dropped or self._handshake is not None:
            return []
        messages = self._bare.feed(octets, time_ns, frame, gap_before)
        if messages:
            self.transport = "TCP"
        elif not self._bare.found and self._bare.skipped > PATIENCE_OCTETS:
            self._drop()
        return messages

    def flush(self) -> list[FramedMessage]:
        """What the end of the capture leaves of a message."""
        return self._bare.flush() if self.transport == "TCP" else []

    def _recognise(self, first: bytes) -> None:
        self._recognised = True
        if first[:2] in _TLS_RECORDS:
            self._drop()
        elif first.startswith(_HANDSHAKES):
            self._handshake = bytearray()
        elif not looks_like_sip(first) and looks_like_sip(first_payload(first)):
            # The capture began behind the handshake.
            self._web = WebSocketStream()

    def _behind_handshake(self) -> bytes:
        assert self._handshake is not None
        octets = bytes(self._handshake)
        end = handshake_end(octets)
        if end is None:
            return b""
        self._handshake = None
        if end == 0:
            self._drop()
            return b""
        self._web = WebSocketStream()
        return octets[end:]

    def _unwrapped(self, octets: bytes, time_ns: int, frame: int, gap_before: bool) -> list[FramedMessage]:
        assert self._web is not None
        if gap_before:
            self._web.restart()
        payloads = self._web.feed(octets)
        messages = [FramedMessage(one, time_ns, frame) for one in payloads if looks_like_sip(one)]
        if messages:
            self.transport = "WebSocket"
        elif not self.transport and any(one.strip(b"\r\n") for one in payloads):
            # Another protocol on top of WebSocket.
            self._drop()
        return messages

    def _drop(self) -> None:
        self.dropped = True
        self._bare, self._web, self._handshake = MessageStream(), None, None
