"""Exchanges of SIP messages written down as a flow diagram is: who sends what to whom, and when."""

from dataclasses import dataclass, field

from rtpaudit.signalling.calls import SignallingMessage, SipCall
from rtpaudit.signalling.dialogs import calls_of
from rtpaudit.signalling.sightings import Reader, Sighting
from rtpaudit.signalling.sip import parse_message

HOSTS = {
    "alice": "192.0.2.101:5060",
    "bob": "192.0.2.201:5060",
    "carol": "192.0.2.100:5060",
    "proxy1": "192.0.2.111:5060",
    "proxy2": "192.0.2.222:5060",
    "alg": "192.0.2.128:5060",
}
MS = 1_000_000


def described(address: str, port: int, types: str = "0", *attributes: str) -> str:
    """A description of one audio stream."""
    lines = [f"v=0\no=- 1 1 IN IP4 {address}\ns=-\nc=IN IP4 {address}\nt=0 0\nm=audio {port} RTP/AVP {types}"]
    return "\n".join([*lines, *(f"a={one}" for one in attributes)]) + "\n"


@dataclass
class Flow:
    """The messages of one Call-ID, as one capture saw them."""

    call_id: str = "2xTb9vxSit55XU7p8@atlanta.example.com"
    caller: str = "Alice <sip:alice@atlanta.example.com>"
    callee: str = "Bob <sip:bob@biloxi.example.com>"
    caller_tag: str = "9fxced76sl"
    callee_tag: str = "314159"
    octets: list[tuple[int, str, str, bytes]] = field(default_factory=list)
    """time in ms, source, destination, message"""

    def request(
        self,
        at_ms: float,
        path: str,
        method: str,
        number: int,
        via: str,
        *,
        by: str = "caller",
        tag: str | None = None,
        sdp: str = "",
        extra: str = "",
        kind: str = "application/sdp",
    ) -> None:
        """A request. ``via`` are the branches, topmost first; ``tag`` that of the callee, "" where it has none yet."""
        tag = self.callee_tag if tag is None else tag
        self._send(
            at_ms, path, f"{method} sip:target@example.com SIP/2.0", method, number, via, by, tag, sdp, extra, kind
        )

    def response(
        self,
        at_ms: float,
        path: str,
        status: str,
        method: str,
        number: int,
        via: str,
        *,
        by: str = "caller",
        tag: str | None = None,
        sdp: str = "",
        extra: str = "",
    ) -> None:
        """A response to a request that ``by`` sent."""
        tag = self.callee_tag if tag is None else tag
        kind = "application/sdp"
        self._send(at_ms, path, f"SIP/2.0 {status}", method, number, via, by, tag, sdp, extra, kind)

    def _send(
        self,
        at_ms: float,
        path: str,
        start_line: str,
        method: str,
        number: int,
        via: str,
        by: str,
        tag: str,
        sdp: str,
        extra: str,
        kind: str,
    ) -> None:
        caller = self.caller + (f";tag={self.caller_tag}" if self.caller_tag else "")
        callee = self.callee + (f";tag={tag}" if tag else "")
        ends = (caller, callee) if by == "caller" else (callee, caller)
        vias = "".join(f"Via: SIP/2.0/UDP host.example.com;branch=z9hG4bK{branch}\n" for branch in via.split())
        body = sdp.replace("\n", "\r\n")
        head = f"{start_line}\n{vias}From: {ends[0]}\nTo: {ends[1]}\nCall-ID: {self.call_id}\nCSeq: {number} {method}\n"
        head += extra + ("\n" if extra else "") + (f"Content-Type: {kind}\n" if body else "")
        head += f"Content-Length: {len(body)}\n\n"
        source, destination = (HOSTS.get(name, name) for name in path.split(">"))
        self.octets.append(
            (round(at_ms * MS), source, destination, head.replace("\n", "\r\n").encode() + body.encode())
        )

    def invite(
        self, at_ms: float, path: str = "alice>bob", *, number: int = 1, via: str = "74bf9", sdp: str = ""
    ) -> None:
        """The INVITE that begins the call."""
        self.request(at_ms, path, "INVITE", number, via, tag="", sdp=sdp)


def sightings(*flows: Flow) -> list[Sighting]:
    """What a capture of the flows gives, in the order of the messages."""
    reader, found = Reader(), []
    for at, source, destination, octets in (one for flow in flows for one in flow.octets):
        message = parse_message(octets)
        assert message.faults == ()
        row = SignallingMessage(at, source, destination, "SIP", "UDP", "", "")
        sighting = reader.sighting(message, reader.row(message, row), [])
        if sighting is not None:
            found.append(sighting)
    return found


def calls(*flows: Flow) -> list[SipCall]:
    """The calls that the flows make."""
    return calls_of(sightings(*flows))


def call(*flows: Flow) -> SipCall:
    """The only call that the flows make."""
    (one,) = calls(*flows)
    return one
