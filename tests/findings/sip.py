"""The signalling of a call made by hand: INVITE, answer, changes and release, with their descriptions."""

import struct
from dataclasses import dataclass, field

from tests import craft
from tests.findings.made import CALLEE, CALLER, MS, START_NS, Frames

PORT = 5060


@dataclass
class Said:
    """What both sides said, and when [ms]; the answer comes before the first packet of ``Line`` by default."""

    invite_ms: float = -2000.0
    ringing_ms: float | None = -1500.0
    answer_ms: float = -30.0
    bye_ms: float | None = 10_100.0
    caller_at: tuple[str, int] = CALLER
    """where the caller says that it receives"""
    callee_at: tuple[str, int] = CALLEE
    caller_takes: str = "0 101"
    callee_takes: str = "0 101"
    caller_ptime: int | None = None
    callee_ptime: int | None = None
    changes: list[tuple[float, str]] = field(default_factory=list)
    """when the caller sends a new offer, and with which direction"""
    from_caller_only: bool = False
    """whether the capture sees the caller's messages alone"""

    def frames(self) -> Frames:
        """The messages as frames, by time."""
        found: Frames = []
        self._say(found, self.invite_ms, True, "INVITE sip:200@line.example SIP/2.0", 1, self._offer())
        if self.ringing_ms is not None:
            self._say(found, self.ringing_ms, False, "SIP/2.0 180 Ringing", 1)
        self._say(found, self.answer_ms, False, "SIP/2.0 200 OK", 1, self._answer())
        self._say(found, self.answer_ms + 10, True, "ACK sip:200@line.example SIP/2.0", 1)
        for number, (at, direction) in enumerate(self.changes, 2):
            answers = {"sendonly": "recvonly", "inactive": "inactive"}.get(direction, "sendrecv")
            self._say(found, at, True, "INVITE sip:200@line.example SIP/2.0", number, self._offer(direction))
            self._say(found, at + 20, False, "SIP/2.0 200 OK", number, self._answer(answers))
            self._say(found, at + 30, True, "ACK sip:200@line.example SIP/2.0", number)
        if self.bye_ms is not None:
            self._say(found, self.bye_ms, True, "BYE sip:200@line.example SIP/2.0", 90)
            self._say(found, self.bye_ms + 20, False, "SIP/2.0 200 OK", 90, method="BYE")
        return found

    def _offer(self, direction: str = "sendrecv") -> str:
        return description(self.caller_at, self.caller_takes, self.caller_ptime, direction)

    def _answer(self, direction: str = "sendrecv") -> str:
        return description(self.callee_at, self.callee_takes, self.callee_ptime, direction)

    def _say(
        self, into: Frames, at_ms: float, by_caller: bool, start: str, number: int, body: str = "", method: str = ""
    ) -> None:
        if self.from_caller_only and not by_caller:
            return
        named = method or (start.split()[0] if by_caller else "INVITE")
        early = number == 1 and start.startswith(("INVITE", "SIP/2.0 1"))
        lines = [
            start,
            f"Via: SIP/2.0/UDP {CALLER[0]};branch=z9hG4bK{number}{named}",
            "From: <sip:100@line.example>;tag=a1",
            f"To: <sip:200@line.example>{'' if early else ';tag=b2'}",
            "Call-ID: made@line.example",
            f"CSeq: {number} {named}",
            *(["Content-Type: application/sdp"] if body else []),
            f"Content-Length: {len(body)}",
        ]
        octets = ("\r\n".join(lines) + "\r\n\r\n" + body).encode()
        source, destination = (CALLER[0], CALLEE[0]) if by_caller else (CALLEE[0], CALLER[0])
        packet = craft.ipv4(craft.udp(octets, PORT, PORT), source, destination, ttl=60)
        into.append((START_NS + int(at_ms * MS), craft.ethernet(packet)))


def description(at: tuple[str, int], takes: str, packet_ms: int | None, direction: str) -> str:
    """A session description with one audio section."""
    lines = [
        "v=0", f"o=- 1 1 IN IP4 {at[0]}", "s=-", f"c=IN IP4 {at[0]}", "t=0 0", f"m=audio {at[1]} RTP/AVP {takes}",
        "a=rtpmap:101 telephone-event/8000",
    ]  # fmt: skip
    if packet_ms is not None:
        lines.append(f"a=ptime:{packet_ms}")
    return "\r\n".join([*lines, f"a={direction}"]) + "\r\n"


def refusal(at_ms: float, of: tuple[str, int], to: tuple[str, int]) -> Frames:
    """ICMP port unreachable: the host of an address answers who sent to it (RFC 792, from memory)."""
    quoted = craft.ipv4(craft.udp(bytes(20), to[1], of[1]), to[0], of[0])[:28]
    body = struct.pack("!BBHI", 3, 3, 0, 0) + quoted
    return [(START_NS + int(at_ms * MS), craft.ethernet(craft.ipv4(body, of[0], to[0], protocol=1)))]
