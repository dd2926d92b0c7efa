"""UDP payloads as Packets, so that the media room is tested without a capture file."""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from rtpaudit.decode.packets import Flows, Kind, Packets
from rtpaudit.media.find import DialogOf, find_streams
from rtpaudit.media.rtp import RtpCollector
from rtpaudit.media.streams import Stream
from rtpaudit.signalling.payload_types import Encoding
from tests.craft import rtp

START_MS = 1_700_000_000_000.0
MS = 1_000_000


@dataclass
class Datagrams:
    """Payloads with their arrival and flow; flow 0 is A to B, flow 1 B to A, further ones other ports."""

    rows: list[tuple[float, bytes, int, int]] = field(default_factory=list)

    def add(self, at_ms: float, payload: bytes, flow: int = 0, interface: int = 0) -> "Datagrams":
        self.rows.append((at_ms, payload, flow, interface))
        return self

    def packets(self) -> Packets:
        n = len(self.rows)
        lengths = np.array([len(row[1]) for row in self.rows], np.int32)
        starts = np.concatenate([[0], np.cumsum(lengths)])[:n].astype(np.int64)
        octets = np.frombuffer(b"".join(row[1] for row in self.rows), np.uint8)
        kinds = [
            Kind.RTP if len(row[1]) >= 12 and row[1][0] >> 6 == 2 and not 192 <= row[1][1] <= 223 else Kind.OTHER
            for row in self.rows
        ]
        return Packets(
            octets=octets,
            frame=np.arange(1, n + 1),
            time_ns=np.array([round((START_MS + row[0]) * MS) for row in self.rows], np.int64),
            interface=np.array([row[3] for row in self.rows], np.uint16),
            flow=np.array([row[2] for row in self.rows], np.int32),
            kind=np.array(kinds, np.uint8),
            start=starts,
            length=lengths,
            captured=lengths,
            dscp=np.full(n, 46, np.uint8),
            ttl=np.full(n, 64, np.uint8),
            ip_id=np.zeros(n, np.uint16),
            vlan=np.zeros(n, np.uint16),
        )

    def flows(self) -> Flows:
        count = max((row[2] for row in self.rows), default=0) + 1
        source, destination = np.zeros((count, 16), np.uint8), np.zeros((count, 16), np.uint8)
        source[:, :4], destination[:, :4] = (192, 0, 2, 1), (198, 51, 100, 1)
        ports = np.full(count, 4000, np.uint16), np.full(count, 5000, np.uint16)
        for flow in range(1, count):
            if flow == 1:
                source[1], destination[1] = destination[0].copy(), source[0].copy()
                ports[0][1], ports[1][1] = 5000, 4000
            else:
                ports[0][flow] += 2 * flow
        return Flows(source, destination, *ports, np.full(count, 4, np.uint8), np.full(count, 17, np.uint8))

    def streams(self, given: dict[int, Encoding] | None = None, dialog_of: DialogOf | None = None) -> list[Stream]:
        packets = self.packets()
        collector = RtpCollector()
        collector.add(packets, 0)
        return find_streams(collector, self.flows(), [packets.octets], given=given, dialog_of=dialog_of)


def talk(
    numbers: Sequence[int], start_ms: float = 0.0, first_ticks: int = 0, step: int = 160, **header: int
) -> Datagrams:
    """One PCMU packet per number, sent and received every 20 ms of the numbering; the payload tells the number."""
    made = Datagrams()
    flow = header.pop("flow", 0)
    for number in numbers:
        offset = number - numbers[0]
        made.add(start_ms + 20.0 * offset, packet(number, first_ticks + step * offset, **header), flow)
    return made


def packet(number: int, ticks: int, **header: int) -> bytes:
    """An RTP packet whose payload is its number over and over."""
    return rtp(number.to_bytes(8, "big", signed=True) * 20, number, ticks, **header)  # type: ignore[arg-type]


def joined(*parts: Datagrams) -> Datagrams:
    """All datagrams, in the order given."""
    return Datagrams([row for part in parts for row in part.rows])
