"""RTCP of one recording: datagrams come in, reports with their time and their two ends go out."""

from dataclasses import dataclass, field

import numpy as np

from rtpaudit.capture.frames import Damage
from rtpaudit.decode.packets import Flows, Kind, Packets
from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.rtcp import Packet, parse_compound

MAX_DATAGRAMS = 4_000_000
"""a month of reports every 5 s from a dozen ends; what is beyond is counted as damage"""


@dataclass(frozen=True, slots=True)
class RtcpDatagram:
    """One RTCP datagram."""

    time_ns: int
    flow: int
    source: str
    """address, without the port"""
    destination: str
    packets: tuple[Packet, ...]


@dataclass(slots=True)
class RtcpReports:
    """All RTCP of one recording, in order of the file."""

    datagrams: list[RtcpDatagram] = field(default_factory=list)
    damage: list[Damage] = field(default_factory=list)


class RtcpCollector:
    """Collects the RTCP of one recording, batch by batch."""

    def __init__(self) -> None:
        self._found = RtcpReports()
        self._refused: dict[int, tuple[str, int, str, int]] = {}
        self._beyond = 0
        self._ends: dict[int, tuple[str, str]] = {}

    def add(self, packets: Packets, flows: Flows, capture: str = "") -> None:
        """Take the rows of kind RTCP."""
        for row in np.flatnonzero(packets.kind == Kind.RTCP).tolist():
            if len(self._found.datagrams) >= MAX_DATAGRAMS:
                self._beyond += 1
                continue
            begin, there = int(packets.start[row]), int(packets.captured[row])
            octets = packets.octets[begin : begin + there].tobytes()
            flow = int(packets.flow[row])
            try:
                parsed = parse_compound(octets, cut=there < packets.length[row])
            except MalformedPacket as fault:
                name, offset, what, count = self._refused.get(flow, (capture, begin, str(fault), 0))
                self._refused[flow] = name, offset, what, count + 1
                continue
            source, destination = self._places(flows, flow)
            self._found.datagrams.append(
                RtcpDatagram(int(packets.time_ns[row]), flow, source, destination, tuple(parsed))
            )

    def finish(self) -> RtcpReports:
        """The reports; what was refused is damage only where the same flow also carries what is RTCP beyond doubt."""
        good = {one.flow for one in self._found.datagrams}
        for flow, (capture, offset, what, count) in self._refused.items():
            if flow in good:
                self._found.damage.append(Damage(capture, offset, f"{what}; {count} such", f"{count} RTCP datagrams"))
        if self._beyond:
            lost = f"{self._beyond} RTCP datagrams"
            self._found.damage.append(Damage("", 0, f"more than {MAX_DATAGRAMS} RTCP datagrams", lost))
        return self._found

    def _places(self, flows: Flows, flow: int) -> tuple[str, str]:
        if flow not in self._ends:
            self._ends[flow] = flows.source_text(flow), flows.destination_text(flow)
        return self._ends[flow]
