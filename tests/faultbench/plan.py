"""A call as it is planned: who, where, with what, seen from where; all of it drawn anew for each seed."""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from tests.faultbench.stream import STATIC, Leg

Frames = list[tuple[float, bytes, str]]
"""second of the capture, IP packet, kind: rtp, rtcp, sip, icmp"""

SUPPRESSIONS = ("", "", "", "", "pauses", "noise")
PACKET_TIMES = (10, 20, 20, 20, 30, 40, 60)


@dataclass
class Plan:
    """One call of a capture."""

    draw: np.random.Generator
    caller: str
    callee: str
    a: Leg
    """from the caller"""
    b: Leg
    """from the callee"""
    seconds: float
    ring_s: float
    first_word_s: float
    """from INVITE to 180"""
    sip: bool = True
    rtcp: bool = True
    extended_reports: dict[str, Any] = field(default_factory=dict)
    """by leg that is reported on: fields of the voice-quality block"""
    wrong_highest: dict[str, int] = field(default_factory=dict)
    """by leg: what a faulty receiver adds to the highest number that it reports"""
    far: dict[str, float] = field(default_factory=dict)
    bye: bool = True
    bye_early_s: float = 0.0
    """how long media goes on after BYE"""
    status: int = 200
    announces: dict[str, str] = field(default_factory=dict)
    """address that a side announces where it is not its own"""
    announced_ptime: dict[str, int] = field(default_factory=dict)
    announced_encodings: dict[str, list[tuple[int, str, int]]] = field(default_factory=dict)
    hold: tuple[float, float] | None = None
    """hold by the caller: from, to; never released where the second is infinite"""
    port_unreachable: str = ""
    """leg whose packets a host answers with ICMP"""
    on_capture: list[Callable[["Plan", Frames], Frames]] = field(default_factory=list)
    capture: "CaptureSettings | None" = None
    proxy: str = ""
    events: list[tuple[str, float, str, bool]] = field(default_factory=list)
    """leg, second, key, whether it is also heard"""

    @property
    def legs(self) -> tuple[Leg, Leg]:
        """Both directions."""
        return self.a, self.b

    def leg(self) -> Leg:
        """One of the two, by chance."""
        return self.legs[int(self.draw.integers(2))]

    def other(self, leg: Leg) -> Leg:
        """The opposite direction."""
        return self.b if leg is self.a else self.a

    def longer(self, low: float, high: float) -> None:
        """A call of so many seconds."""
        self.seconds = float(self.draw.uniform(low, high))


@dataclass
class CaptureSettings:
    """How the capture is written."""

    link: str = "ethernet"
    """ethernet, vlan, qinq, cooked, cooked2, raw, null"""
    container: str = "pcap"
    """pcap, pcap-ns, pcap-be, pcapng"""
    snap: int = 0
    start_s: float = 1_772_000_000.0
    dropped: int | None = None


LINKS = ("ethernet", "ethernet", "vlan", "qinq", "cooked", "cooked2", "raw", "null")
CONTAINERS = ("pcap", "pcap-ns", "pcap-be", "pcapng")


def capture_settings(draw: np.random.Generator) -> CaptureSettings:
    """A way of capturing, by chance."""
    return CaptureSettings(
        link=str(draw.choice(LINKS)),
        container=str(draw.choice(CONTAINERS)),
        start_s=1_772_000_000.0 + float(draw.uniform(0, 5e6)),
    )


def plan(
    draw: np.random.Generator,
    *,
    encoding: str = "",
    packet_ms: int = 0,
    suppression: str | None = None,
) -> Plan:
    """A clean call."""
    seconds = float(draw.uniform(12, 40))
    version = 6 if draw.random() < 0.2 else 4
    caller_host, callee_host, proxy = _hosts(draw, version)
    encoding = encoding or str(draw.choice(["PCMU", "PCMA", "PCMU", "PCMA", "PCMU", "PCMA", "G722", "L16"]))
    if encoding == "G722" and not _encodes_g722():
        encoding = "PCMA"
    packet_ms = packet_ms or int(draw.choice(PACKET_TIMES))
    if encoding == "L16":
        packet_ms = min(packet_ms, 30)
    if suppression is None:
        suppression = str(draw.choice(SUPPRESSIONS))
    near_caller = draw.random() < 0.5
    # Distance of each end from the capture point: routers and one-way time.
    hops = {"caller": int(draw.integers(0, 2)) if near_caller else int(draw.integers(2, 13))}
    hops["callee"] = int(draw.integers(2, 13)) if near_caller else int(draw.integers(0, 2))
    away = {side: 0.0002 + 0.0015 * count + float(draw.uniform(0, 0.002 * (count + 1))) for side, count in hops.items()}
    dscp = int(draw.choice([46, 46, 46, 0, 34]))
    ports = [int(draw.integers(5000, 32000)) * 2 for _ in range(2)]
    legs = []
    for k, (side, peer) in enumerate((("caller", "callee"), ("callee", "caller"))):
        legs.append(
            Leg(
                source=((caller_host, callee_host)[k], ports[k]),
                destination=((callee_host, caller_host)[k], ports[1 - k]),
                **_encoding(encoding, draw if k == 0 else None, legs),
                packet_ms=packet_ms,
                ssrc=int(draw.integers(1, 1 << 32)),
                first_sequence=int(draw.choice([draw.integers(1 << 16), draw.integers(65000, 65536)])),
                first_ticks=int(draw.integers(1 << 32)),
                skew_ppm=float(draw.uniform(-60, 60)),
                dscp=dscp,
                ttl=int(draw.choice([64, 64, 128, 255])) - hops[side],
                identification=str(draw.choice(["count", "random", "zero"])),
                suppression=suppression,
                before_s=away[side],
                after_s=away[peer],
                jitter_s=float(draw.uniform(0.0001, 0.0004) + 0.0003 * hops[side] * draw.uniform(0, 1)),
                level_dbov=float(draw.uniform(-29, -20)),
                noise_dbov=float(draw.uniform(-72, -60)),
                begins_s=float(draw.uniform(0.0, 0.12)),
            )
        )
    return Plan(
        draw,
        caller=f"0{draw.integers(1632960000, 1632961000)}",
        callee=f"0{draw.integers(2079460000, 2079461000)}",
        a=legs[0],
        b=legs[1],
        seconds=seconds,
        ring_s=float(draw.uniform(1.0, 6.0)),
        first_word_s=float(draw.uniform(0.05, 0.8)),
        # Without signalling nobody knows what a dynamic payload type stands for.
        sip=bool(draw.random() < 0.75) or encoding == "L16",
        rtcp=bool(draw.random() < 0.75),
        proxy=proxy if draw.random() < 0.3 else "",
        capture=capture_settings(draw),
    )


def _hosts(draw: np.random.Generator, version: int) -> tuple[str, str, str]:
    """Hosts of the networks that are kept for documents (RFC 5737, RFC 3849)."""
    if version == 6:
        return tuple(f"2001:db8:{draw.integers(1, 9999):x}::{draw.integers(1, 65535):x}" for _ in range(3))  # type: ignore[return-value]
    nets = draw.permutation(["192.0.2", "198.51.100", "203.0.113"])
    return tuple(f"{net}.{draw.integers(2, 250)}" for net in nets)  # type: ignore[return-value]


def _encoding(name: str, draw: np.random.Generator | None, earlier: list[Leg]) -> dict[str, Any]:
    """What an encoding is under: payload type, clock and sampling rate. Both directions share a dynamic type."""
    if name != "L16":
        rate = 16000 if name == "G722" else 8000
        return {"encoding": name, "payload_type": STATIC[name], "clock_hz": 8000, "sampling_hz": rate}
    if draw is None:
        first = earlier[0]
        return {
            "encoding": name,
            "payload_type": first.payload_type,
            "clock_hz": first.clock_hz,
            "sampling_hz": first.clock_hz,
        }
    rate = int(draw.choice([8000, 16000]))
    return {"encoding": name, "payload_type": int(draw.integers(96, 128)), "clock_hz": rate, "sampling_hz": rate}


def _encodes_g722() -> bool:
    try:
        import av  # noqa: F401
    except ImportError:
        return False
    return True
