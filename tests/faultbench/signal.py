"""What the ends say about a call: SIP with its descriptions, RTCP with its reports, ICMP where nobody listens."""

import struct

import numpy as np
from numpy.typing import NDArray

from tests.craft import ipv4, ipv6, udp
from tests.faultbench.plan import Frames, Plan
from tests.faultbench.stream import COMFORT_NOISE, Leg, Packets

SIP_PORT = 5060
NTP_EPOCH = 2_208_988_800


def datagram(
    octets: bytes, source: tuple[str, int], destination: tuple[str, int], dscp: int, ttl: int, number: int = 0
) -> bytes:
    """An IP packet of either version."""
    body = udp(octets, source[1], destination[1])
    if ":" in source[0]:
        return ipv6(body, source[0], destination[0], dscp=dscp, hop_limit=ttl)
    return ipv4(body, source[0], destination[0], dscp=dscp, ttl=ttl, identification=number & 0xFFFF)


def description(plan: Plan, side: str, version: int, direction: str = "sendrecv") -> str:
    """Session description of one side (RFC 4566): where it receives, and what."""
    receives = plan.b if side == "caller" else plan.a
    address, port = plan.announces.get(side, receives.destination[0]), receives.destination[1]
    kind = "IP6" if ":" in address else "IP4"
    offered = plan.announced_encodings.get(side)
    if offered is None:
        offered = [(receives.payload_type, receives.encoding, receives.clock_hz)]
    types = [number for number, _, _ in offered]
    with_noise = receives.suppression == "noise"
    numbers = " ".join(str(one) for one in [*types, *([COMFORT_NOISE] if with_noise else []), 101])
    lines = [
        "v=0", f"o=- {plan.draw.integers(1 << 31)} {version} IN {kind} {address}",
        "s=-", f"c=IN {kind} {address}", "t=0 0", f"m=audio {port} RTP/AVP {numbers}",
        *(f"a=rtpmap:{number} {name}/{clock}" for number, name, clock in offered),
        "a=rtpmap:101 telephone-event/8000", "a=fmtp:101 0-15",
    ]  # fmt: skip
    if side in plan.announced_ptime:
        lines.append(f"a=ptime:{plan.announced_ptime[side]}")
    if direction != "sendrecv":
        lines.append(f"a={direction}")
    return "\r\n".join(lines) + "\r\n"


class Dialog:
    """The messages of one call."""

    def __init__(self, plan: Plan, frames: Frames) -> None:
        self.plan, self.frames = plan, frames
        draw = plan.draw
        self.call_id = f"{draw.integers(1 << 62):x}@{plan.a.source[0]}"
        self.tags = {side: f"{draw.integers(1 << 40):x}" for side in ("caller", "callee")}
        self.branch = 0
        self.hosts = {"caller": plan.a.source[0], "callee": plan.b.source[0]}
        self.dscp = int(draw.choice([0, 24, 26, 40]))

    def say(self, at_s: float, side: str, start: str, method: str, number: int, tagged: bool, body: str = "") -> None:
        """One message from a side to the other, perhaps over a proxy that the capture sees from one side."""
        plan, request = self.plan, not start.startswith("SIP/2.0")
        if request:
            self.branch += 1
        by = side if request else ("callee" if side == "caller" else "caller")
        to = "callee" if by == "caller" else "caller"
        tags = [f";tag={self.tags[by]}", f";tag={self.tags[to]}" if tagged else ""]
        users = {"caller": plan.caller, "callee": plan.callee}
        lines = [
            start,
            f"Via: SIP/2.0/UDP {_bracketed(self.hosts[by])};branch=z9hG4bK{self.tags[by]}{self.branch}",
            *([] if not request else ["Max-Forwards: 70"]),
            f"From: <sip:{users[by]}@exchange.example>{tags[0]}",
            f"To: <sip:{users[to]}@exchange.example>{tags[1]}",
            f"Call-ID: {self.call_id}",
            f"CSeq: {number} {method}",
            f"Contact: <sip:{users[side]}@{_bracketed(self.hosts[side])}>",
            *(["Content-Type: application/sdp"] if body else []),
            f"Content-Length: {len(body)}",
        ]
        octets = ("\r\n".join(lines) + "\r\n\r\n" + body).encode()
        source, destination = self.hosts[side], self.hosts["callee" if side == "caller" else "caller"]
        if plan.proxy:
            source, destination = (source, plan.proxy) if side == "caller" else (plan.proxy, destination)
        leg = plan.a if side == "caller" else plan.b
        packet = datagram(
            octets, (source, SIP_PORT), (destination, SIP_PORT), self.dscp, leg.ttl, self.branch * 7 + number
        )
        self.frames.append((at_s, packet, "sip"))

    def set_up(self, at_s: float, answer_s: float) -> None:
        """INVITE to ACK, or to the refusal."""
        plan = self.plan
        target = f"sip:{plan.callee}@exchange.example"
        self.say(at_s, "caller", f"INVITE {target} SIP/2.0", "INVITE", 1, False, description(plan, "caller", 1))
        self.say(at_s + 0.02, "callee", "SIP/2.0 100 Trying", "INVITE", 1, False)
        if plan.first_word_s < answer_s - at_s - 0.2:
            self.say(at_s + plan.first_word_s, "callee", "SIP/2.0 180 Ringing", "INVITE", 1, True)
        self.say(answer_s, "callee", "SIP/2.0 200 OK", "INVITE", 1, True, description(plan, "callee", 1))
        self.say(answer_s + 0.03, "caller", f"ACK {target} SIP/2.0", "ACK", 1, True)

    def change(self, at_s: float, number: int, direction: str) -> None:
        """A re-INVITE of the caller."""
        plan = self.plan
        target = f"sip:{plan.callee}@exchange.example"
        answer = {"sendonly": "recvonly", "inactive": "inactive"}.get(direction, "sendrecv")
        self.say(
            at_s,
            "caller",
            f"INVITE {target} SIP/2.0",
            "INVITE",
            number,
            True,
            description(plan, "caller", number, direction),
        )
        self.say(
            at_s + 0.05, "callee", "SIP/2.0 200 OK", "INVITE", number, True, description(plan, "callee", number, answer)
        )
        self.say(at_s + 0.09, "caller", f"ACK {target} SIP/2.0", "ACK", number, True)

    def hang_up(self, at_s: float) -> None:
        """BYE by either side."""
        side = "caller" if self.plan.draw.random() < 0.5 else "callee"
        other = "callee" if side == "caller" else "caller"
        number = 20
        self.say(at_s, side, f"BYE sip:{self.plan.callee}@exchange.example SIP/2.0", "BYE", number, True)
        self.say(at_s + 0.04, other, "SIP/2.0 200 OK", "BYE", number, True)


def _bracketed(host: str) -> str:
    return f"[{host}]:{SIP_PORT}" if ":" in host else f"{host}:{SIP_PORT}"


class Receiver:
    """What the far end of a leg knows of it at any time (RFC 3550, 6.4.1)."""

    def __init__(self, leg: Leg, packets: Packets, wrong: int = 0) -> None:
        self.leg = leg
        self.wrong = wrong
        there = np.flatnonzero(~packets.lost & ~packets.lost_after)
        order = there[np.argsort(packets.at_s[there], kind="stable")]
        self.at_s = packets.at_s[order] + leg.after_s
        self.sequence = packets.sequence[order]
        self.ticks = packets.ticks[order]
        self.copies = np.sort(np.array([packets.at_s[k] + late + leg.after_s for k, late in packets.copies]))
        self.ssrc = int(packets.ssrc[0]) if len(packets) else 0
        self.jitter = _jitter(self.at_s, self.ticks, leg.clock_hz)
        self.before = (0, 0)

    def block(self, now_s: float, last_report: tuple[float, int]) -> bytes | None:
        """Report block, None before the first packet."""
        count = int(np.searchsorted(self.at_s, now_s))
        if not count:
            return None
        highest = int(self.sequence[:count].max())
        expected = highest - int(self.sequence[0]) + 1
        received = count + int(np.searchsorted(self.copies, now_s))
        since = (expected - self.before[0], received - self.before[1])
        self.before = (expected, received)
        fraction = max(0, min(255, 256 * (since[0] - since[1]) // since[0])) if since[0] > 0 else 0
        cumulative = (expected - received) & 0xFFFFFF
        when, stamp = last_report
        stamp = stamp if when < now_s else 0
        wait = int((now_s - when) * 65536) if stamp else 0
        extended = self.leg.first_sequence + highest + self.wrong
        return struct.pack(
            "!IIIIII",
            self.ssrc,
            fraction << 24 | cumulative,
            extended & 0xFFFFFFFF,
            int(self.jitter[count - 1]),
            stamp,
            wait,
        )


def _jitter(at_s: NDArray[np.float64], ticks: NDArray[np.int64], clock_hz: int) -> list[float]:
    estimate, found = 0.0, []
    for k in range(len(at_s)):
        if k:
            moved = (at_s[k] - at_s[k - 1]) * clock_hz - (ticks[k] - ticks[k - 1])
            estimate += (abs(moved) - estimate) / 16
        found.append(estimate)
    return found


def control(plan: Plan, frames: Frames, origin_s: float, start_s: float, packets: dict[str, Packets]) -> None:
    """Sender reports of both sides with what they heard, every few seconds, seen at the capture point."""
    draw = plan.draw
    pairs = {"a": (plan.a, plan.b), "b": (plan.b, plan.a)}
    receivers = {name: Receiver(pairs[name][0], packets[name], plan.wrong_highest.get(name, 0)) for name in pairs}
    heard: dict[str, tuple[float, int]] = {"a": (0.0, 0), "b": (0.0, 0)}
    times = [
        (at, name) for name in ("a", "b") for at in np.arange(draw.uniform(1.5, 4), plan.seconds, draw.uniform(4, 6))
    ]
    for at, name in sorted(times):
        leg, other = pairs[name]
        sent = packets[name]
        if not len(sent) or at < leg.begins_s or at > min(leg.ends_s, plan.seconds):
            continue
        at = float(at + draw.uniform(-0.3, 0.3))
        count = int(np.searchsorted(sent.sent_s, at))
        now = origin_s + start_s + at
        stamp = int((now + NTP_EPOCH) * 65536 * 65536)
        rtp = (leg.first_ticks + int(at * leg.clock_hz)) & 0xFFFFFFFF
        block = receivers["b" if name == "a" else "a"].block(at, heard[name])
        body = struct.pack(
            "!BBHIQIII", 0x80 | (block is not None), 200, 6 + 6 * (block is not None), leg.ssrc,
            stamp & 0xFFFFFFFFFFFFFFFF, rtp, count, sum(len(one) for one in sent.payload[:count]) & 0xFFFFFFFF,
        )  # fmt: skip
        name_item = b"\x01\x08end@line" + bytes(2)
        cname = struct.pack("!BBHI", 0x81, 202, 4, leg.ssrc) + name_item
        octets = body + (block or b"") + cname
        if name in plan.extended_reports and block is not None:
            octets += voice_quality(leg.ssrc, other.ssrc, plan.extended_reports[name])
        source, destination = (leg.source[0], leg.source[1] + 1), (leg.destination[0], leg.destination[1] + 1)
        frames.append((start_s + at + leg.before_s, datagram(octets, source, destination, leg.dscp, leg.ttl), "rtcp"))
        heard["b" if name == "a" else "a"] = (at + leg.before_s + leg.after_s, stamp >> 16 & 0xFFFFFFFF)


QUIET = {
    "loss": 0, "discard": 0, "burst_density": 0, "gap_density": 0, "burst_ms": 0, "gap_ms": 0,
    "round_trip_ms": 0, "end_ms": 0, "signal": 127, "noise": 127, "echo": 127, "gmin": 16, "r": 127, "external_r": 127,
    "mos_lq": 127, "mos_cq": 127, "configuration": 0xA0, "reserved": 0,
    "nominal_ms": 0, "maximum_ms": 0, "absolute_ms": 0,
}  # fmt: skip
"""Fields of the voice-quality block in their order, with nothing to tell."""


def voice_quality(reporter: int, source: int, figures: dict[str, int]) -> bytes:
    """Extended report with the voice-quality block (RFC 3611, 4.7)."""
    part = QUIET | figures
    block = struct.pack("!BBHI", 7, 0, 8, source) + struct.pack("!BBBBHHHHbbBBBBBBBBHHH", *part.values())
    return struct.pack("!BBHI", 0x80, 207, 1 + len(block) // 4, reporter) + block


def unreachable(packet: bytes, host: str, to: str, ttl: int) -> bytes:
    """ICMP port unreachable that quotes a packet (RFC 792, from memory), IPv4 only."""
    body = struct.pack("!BBHI", 3, 3, 0, 0) + packet[:28]
    return ipv4(body, host, to, protocol=1, ttl=ttl)
