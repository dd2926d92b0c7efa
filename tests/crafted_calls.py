"""Whole calls made by hand: the SIP messages, the audio with its RTCP, and keys, as datagrams that make a capture."""

import struct
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import accumulate
from typing import NamedTuple

from tests.craft import START_NS, ethernet, ipv4, pcap, rtp, tcp, udp

S = 1_000_000_000
SIP_PORT = 5060


class Datagram(NamedTuple):
    """UDP payload, when and between whom."""

    time_ns: int
    source: tuple[str, int]
    destination: tuple[str, int]
    payload: bytes

    def frame(self) -> bytes:
        """The same within UDP, IP and Ethernet."""
        packet = udp(self.payload, self.source[1], self.destination[1])
        return ethernet(ipv4(packet, self.source[0], self.destination[0]))


@dataclass(frozen=True)
class Made:
    """What a call is made of."""

    number: int = 1
    at_s: float = 0.0
    seconds: float = 2.0
    caller: str = '"Ann Öhm" <sip:+441632960142@192.0.2.10>'
    callee: str = '"Ferry desk" <sip:ferry.desk@198.51.100.20>'
    caller_host: str = "192.0.2.10"
    callee_host: str = "198.51.100.20"
    extra: str = ""
    """more header fields of the INVITE, each with its line end"""
    digits: str = ""
    """keys that the caller presses, one after another"""

    @property
    def call_id(self) -> str:
        """Call-ID of the dialog."""
        return f"dialog-{self.number}-of-ann@{self.caller_host}"

    @property
    def ports(self) -> tuple[int, int]:
        """Media ports of caller and callee."""
        return 20_000 + 4 * self.number, 30_000 + 4 * self.number

    def _time(self, after_s: float) -> int:
        return START_NS + round((self.at_s + after_s) * S)

    def _sdp(self, host: str, port: int) -> str:
        return (
            f"v=0\r\no=ann {self.number} 1 IN IP4 {host}\r\ns=-\r\nc=IN IP4 {host}\r\nt=0 0\r\n"
            f"m=audio {port} RTP/AVP 0 101\r\na=rtpmap:101 telephone-event/8000\r\n"
        )

    def _message(self, start: str, method: str, number: int, tag: bool, sdp: str = "", extra: str = "") -> bytes:
        head = (
            f"{start}\r\nVia: SIP/2.0/UDP {self.caller_host};branch=z9hG4bK{self.number}{method}{number}\r\n"
            f"From: {self.caller};tag=a{self.number}\r\nTo: {self.callee}{f';tag=b{self.number}' if tag else ''}\r\n"
            f"Call-ID: {self.call_id}\r\nCSeq: {number} {method}\r\n{extra}"
            f"{'Content-Type: application/sdp' + chr(13) + chr(10) if sdp else ''}Content-Length: {len(sdp)}\r\n\r\n"
        )
        return head.encode() + sdp.encode()

    def signalling(self) -> list[Datagram]:
        """INVITE to BYE."""
        there, back = (self.caller_host, SIP_PORT), (self.callee_host, SIP_PORT)
        a, b = self.ports
        uri = f"sip:desk@{self.callee_host}"
        offer, answer = self._sdp(self.caller_host, a), self._sdp(self.callee_host, b)
        end = 0.2 + self.seconds
        made = [
            (0.0, True, self._message(f"INVITE {uri} SIP/2.0", "INVITE", 1, False, offer, self.extra)),
            (0.05, False, self._message("SIP/2.0 180 Ringing", "INVITE", 1, True)),
            (0.1, False, self._message("SIP/2.0 200 OK", "INVITE", 1, True, answer)),
            (0.15, True, self._message(f"ACK {uri} SIP/2.0", "ACK", 1, True)),
            (end, True, self._message(f"BYE {uri} SIP/2.0", "BYE", 2, True)),
            (end + 0.05, False, self._message("SIP/2.0 200 OK", "BYE", 2, True)),
        ]
        return [
            Datagram(self._time(after), there if out else back, back if out else there, octets)
            for after, out, octets in made
        ]

    def media(self) -> list[Datagram]:
        """PCMU both ways, keys of the caller, and a sender report of each side at the end."""
        a, b = (self.caller_host, self.ports[0]), (self.callee_host, self.ports[1])
        found = []
        for source, destination, ssrc in ((a, b, 0xA000 + self.number), (b, a, 0xB000 + self.number)):
            packets = int(self.seconds * 50)
            for k in range(packets):
                octets = rtp(bytes([k % 251 ^ 0x55]) * 160, k, 160 * k, ssrc)
                found.append(Datagram(self._time(0.2 + 0.02 * k), source, destination, octets))
            report = struct.pack("!BBHIQIIII", 0x80, 200, 6, ssrc, 1 << 40, 160 * packets, packets, 160 * packets, 0)
            beside = ((source[0], source[1] + 1), (destination[0], destination[1] + 1))
            found.append(Datagram(self._time(0.2 + self.seconds), *beside, report[:28]))
        if self.digits:
            found = [one for one in found if one.source != a or one.payload[1] == 200] + self._with_keys(a, b)
        return found

    def _with_keys(self, a: tuple[str, int], b: tuple[str, int]) -> list[Datagram]:
        """The caller's audio, with a key of 100 ms in place of five packets every ten."""
        payloads: list[tuple[int, int, bytes, bool]] = []
        for k in range(int(self.seconds * 50)):
            turn, place = divmod(k, 10)
            if place < 5 and turn < len(self.digits):
                code = "0123456789*#ABCD".index(self.digits[turn])
                event = bytes([code, (place == 4) << 7 | 10]) + (160 * (place + 1)).to_bytes(2, "big")
                payloads.append((101, 160 * 10 * turn, event, place == 0))
            else:
                payloads.append((0, 160 * k, bytes([0xFF]) * 160, False))
        return [
            Datagram(
                self._time(0.2 + 0.02 * k), a, b,
                rtp(octets, k, ticks, 0xA000 + self.number, payload_type, marker=marker),
            )
            for k, (payload_type, ticks, octets, marker) in enumerate(payloads)
        ]  # fmt: skip

    def all(self) -> list[Datagram]:
        """Signalling and media."""
        return self.signalling() + self.media()


def capture(datagrams: Iterable[Datagram]) -> bytes:
    """A pcap of datagrams, by time."""
    ordered = sorted(datagrams, key=lambda one: one.time_ns)
    return pcap([one.frame() for one in ordered], [one.time_ns for one in ordered], nanoseconds=True)


def over_tcp(messages: Sequence[Datagram], size: int) -> list[tuple[int, bytes, str]]:
    """TCP segments that carry the messages of one connection, both ways, ``size`` octets at most: time, frame, text.

    Each direction is one run of octets, so that a segment may hold the end of one message and the begin of the next;
    the text is that of all messages of which the segment holds an octet.
    """
    found = []
    for source in {one.source for one in messages}:
        mine = [one for one in messages if one.source == source]
        run = b"".join(one.payload for one in mine)
        ends = list(accumulate(len(one.payload) for one in mine))
        for begin in range(0, len(run), size):
            piece = run[begin : begin + size]
            last = next(k for k, end in enumerate(ends) if end >= begin + len(piece))
            first = next(k for k, end in enumerate(ends) if end > begin)
            other = mine[0].destination
            segment = tcp(piece, source[1], other[1], 1000 + begin)
            text = b"".join(one.payload for one in mine[first : last + 1]).decode()
            frame = ethernet(ipv4(segment, source[0], other[0], protocol=6))
            found.append((mine[last].time_ns + begin, frame, text))
    return sorted(found)
