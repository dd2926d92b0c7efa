"""Calls made by hand for the rules: each stream packet by packet, a whole capture around them, and what was found."""

import tempfile
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

import rtpaudit
from rtpaudit.assess.results import Assessment
from rtpaudit.findings import diagnose
from rtpaudit.findings.rule import Finding
from rtpaudit.profile import Profile
from tests import craft

CALLER, CALLEE = ("192.0.2.10", 4000), ("198.51.100.20", 5000)
START_NS = craft.START_NS
MS = 1_000_000
Frames = list[tuple[int, bytes]]


@dataclass
class Line:
    """One stream: what every packet of it is like. Arrays have one element a packet, sent and lost ones alike."""

    count: int = 500
    lost: Sequence[int] = ()
    delay_ms: float | np.ndarray = 0.0
    packet_ms: int = 20
    skew_ppm: float = 0.0
    first_ms: float = 0.0
    sequence: np.ndarray | None = None
    ticks: np.ndarray | None = None
    sent_ms: np.ndarray | None = None
    dscp: int | np.ndarray = 46
    ttl: int | np.ndarray = 61
    identification: np.ndarray | None = None
    payload_type: int | np.ndarray = 0
    payload: bytes = bytes([0xFF, 0x7F, 0xF0, 0x70] * 40)
    ssrc: int = 0x1A2B3C4D
    copies: Sequence[int] = ()
    copy_after_ms: float = 10.0
    source: tuple[str, int] = CALLER
    destination: tuple[str, int] = CALLEE
    clock_hz: int = 8000
    marks: dict[int, bytes] = field(default_factory=dict)
    """payloads of single packets that differ"""

    def frames(self) -> Frames:
        """The frames that were captured, by time."""
        rows = np.arange(self.count)
        step = self.clock_hz * self.packet_ms // 1000
        sequence = rows if self.sequence is None else self.sequence
        ticks = rows * step if self.ticks is None else self.ticks
        sent = rows * self.packet_ms / (1 + self.skew_ppm * 1e-6) if self.sent_ms is None else self.sent_ms
        at = START_NS + np.rint((sent + self.delay_ms + self.first_ms) * MS).astype(np.int64)
        dscp, ttl, kind = (np.broadcast_to(one, self.count) for one in (self.dscp, self.ttl, self.payload_type))
        number = rows + 1 if self.identification is None else self.identification
        size = self.clock_hz * self.packet_ms // 1000
        usual = (self.payload * (size // len(self.payload) + 1))[:size]
        gone = set(self.lost)
        frames = []
        for k in range(self.count):
            if k in gone:
                continue
            packet = craft.rtp(
                self.marks.get(k, usual), int(sequence[k]), int(ticks[k]), self.ssrc, int(kind[k]), marker=k == 0
            )
            frame = craft.ethernet(
                craft.ipv4(
                    craft.udp(packet, self.source[1], self.destination[1]), self.source[0], self.destination[0],
                    dscp=int(dscp[k]), ttl=int(ttl[k]), identification=int(number[k]) & 0xFFFF,
                )
            )  # fmt: skip
            frames.append((int(at[k]), frame))
            if k in set(self.copies):
                frames.append((int(at[k] + self.copy_after_ms * MS), frame))
        return sorted(frames, key=lambda one: one[0])


def back(**changes) -> Line:
    """The other direction, quiet unless told otherwise."""
    return Line(**{"source": CALLEE, "destination": CALLER, "ssrc": 0x5E6F7081, "ttl": 58, **changes})


def assessed(
    *parts: Line | Frames, profile: Profile | None = None, in_file_order: bool = False, sound: bool = False
) -> Assessment:
    """What an audit makes of a capture of these streams and frames."""
    frames = [frame for part in parts for frame in (part.frames() if isinstance(part, Line) else part)]
    if not in_file_order:
        frames.sort(key=lambda one: one[0])
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "made.pcap"
        path.write_bytes(craft.pcap([octets for _, octets in frames], [at for at, _ in frames], nanoseconds=True))
        return rtpaudit.audit(path, profile=profile, sound=sound).assessment


def found(
    *parts: Line | Frames, profile: Profile | None = None, in_file_order: bool = False, sound: bool = False
) -> list[Finding]:
    """Findings of a capture of these streams and frames."""
    chosen = profile or Profile()
    return diagnose(assessed(*parts, profile=chosen, in_file_order=in_file_order, sound=sound), chosen)


def names(*parts: Line | Frames, profile: Profile | None = None) -> list[str]:
    """Names of the findings above a remark, the gravest first."""
    return [one.finding for one in found(*parts, profile=profile) if one.severity != "remark"]


def only(finding: str, findings: list[Finding]) -> Finding:
    """The one finding of a name."""
    (one,) = [each for each in findings if each.finding == finding]
    return one


def delays(count: int, spans: Sequence[tuple[int, Sequence[float]]]) -> np.ndarray:
    """Delays of 0 ms but for stretches that begin at a packet."""
    made = np.zeros(count)
    for first, stretch in spans:
        made[first : first + len(stretch)] = stretch
    return made


def held_up(count: int, firsts: Sequence[int], height_ms: float, packet_ms: int = 20) -> np.ndarray:
    """Delays that jump up at some packets and fall as all that waited comes at once."""
    stretch = np.arange(height_ms, 0, -packet_ms)
    return delays(count, [(first, stretch) for first in firsts])
