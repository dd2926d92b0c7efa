"""The way of a batch through the layers: compiled loops, then what they leave aside, then the columns."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Damage, Frames, Octets
from rtpaudit.decode.flows import Columns, FlowTable
from rtpaudit.decode.fragments import Arrival, Datagram, Fragments, read_fragment
from rtpaudit.decode.layers import (
    BY_VERSION,
    FRAGMENT,
    LAYERS,
    MALFORMED,
    NOT_IP,
    RARE,
    REASONS,
    ROW,
    SLOW_PATH_FULL,
    TOO_MANY_FLOWS,
    UNKNOWN_LINK,
    Rows,
)
from rtpaudit.decode.link import starting_layer
from rtpaudit.decode.link_headers import ETHERTYPE_TABLE, PPP_TABLE, link_headers
from rtpaudit.decode.network import PROTOCOL_TABLE, network_headers
from rtpaudit.decode.octets import Address, address
from rtpaudit.decode.packets import Flows, Packets
from rtpaudit.decode.rare import HEADERS as SLOW_PATH_OCTETS
from rtpaudit.decode.rare import SlowPath
from rtpaudit.decode.transport import transport_headers
from rtpaudit.decode.tunnels import enter_tunnels

CHUNK = 16_384
"""Rows that go through all kernels before the next ones, so that rows and headers stay in the processor's cache."""

MOST_NESTED = 4
"""Fragments of datagrams that were themselves put together from fragments, and so on."""


@dataclass(frozen=True, slots=True)
class Source:
    """What rows are made from: the frames of a file, or datagrams put together. All columns have shape (n,)."""

    capture: str
    octets: Octets
    start: NDArray[np.int64]
    captured: NDArray[np.int32]
    original: NDArray[np.int32]
    layer: NDArray[np.uint8]
    """layer at which each starts"""
    vlan: NDArray[np.uint16]
    frame: NDArray[np.int64]
    time_ns: NDArray[np.int64]
    interface: NDArray[np.uint16]
    link_types: tuple[int, ...]
    """by interface"""

    def __post_init__(self) -> None:
        """Refuse what would make the kernels, which work on addresses, read elsewhere in memory."""
        if not self.octets.flags.c_contiguous:
            raise ValueError("the octets of a batch must be contiguous")
        if len(self.start) and not (
            self.start.min() >= 0
            and self.captured.min() >= 0
            and (self.start + self.captured).max() <= len(self.octets)
            and (self.original >= self.captured).all()
        ):
            raise ValueError("a frame of a batch lies outside its octets")

    def rows(self, first: int, base: Address) -> Rows:
        """Up to ``CHUNK`` rows from ``first`` on, each at its first octet."""
        part = slice(first, first + CHUNK)
        at = self.start[part] + base
        rows = np.zeros(len(at), ROW)
        rows["at"] = at
        rows["limit"] = at + self.captured[part]
        rows["end"] = at + self.original[part]
        rows["layer"] = self.layer[part]
        rows["vlan"] = self.vlan[part]
        return rows

    def arrival(self, index: int, vlan: int) -> Arrival:
        """What is kept of a frame whose fragment waits for the others."""
        return Arrival(
            self.capture,
            int(self.start[index]),
            int(self.frame[index]),
            int(self.time_ns[index]),
            int(self.interface[index]),
            vlan,
        )


def _of_frames(frames: Frames, capture: str) -> Source:
    link_types = tuple(interface.link_type for interface in frames.interfaces)
    layers = np.array([starting_layer(number) for number in link_types], np.uint8)
    count = len(frames)
    return Source(
        capture,
        frames.octets,
        frames.start,
        frames.captured,
        frames.original,
        layers[frames.interface],
        np.zeros(count, np.uint16),
        np.arange(frames.first_number, frames.first_number + count),
        frames.time_ns,
        frames.interface,
        link_types,
    )


def _of_datagrams(datagrams: list[Datagram], capture: str) -> Source:
    captured = np.array([len(datagram.octets) for datagram in datagrams], np.int32)
    arrivals = [datagram.arrival for datagram in datagrams]
    return Source(
        capture,
        np.frombuffer(b"".join(datagram.octets for datagram in datagrams), np.uint8),
        np.cumsum(captured, dtype=np.int64) - captured,
        captured,
        np.array([datagram.original for datagram in datagrams], np.int32),
        np.full(len(datagrams), BY_VERSION, np.uint8),
        np.array([arrival.vlan for arrival in arrivals], np.uint16),
        np.array([arrival.frame for arrival in arrivals], np.int64),
        np.array([arrival.time_ns for arrival in arrivals], np.int64),
        np.array([arrival.interface for arrival in arrivals], np.uint16),
        (),
    )


def _packets(source: Source, columns: Columns) -> Packets:
    count = columns.count
    index, start = columns.longs[:, :count]
    flow, length, captured = columns.numbers[:, :count]
    ip_id, vlan = columns.shorts[:, :count]
    kind, dscp, ttl = columns.octets[:, :count]
    whole = count == len(source.start)  # then nothing was left out, and the source's own columns serve
    return Packets(
        octets=source.octets,
        frame=source.frame if whole else source.frame[index],
        time_ns=source.time_ns if whole else source.time_ns[index],
        interface=source.interface if whole else source.interface[index],
        flow=flow,
        kind=kind,
        start=start,
        length=length,
        captured=captured,
        dscp=dscp,
        ttl=ttl,
        ip_id=ip_id,
        vlan=vlan,
    )


def take_headers(rows: Rows, octets: Octets, base: Address) -> bool:
    """Move all rows as far as the compiled path and the tunnels go; whether some have to be treated aside."""
    while True:
        link_headers(rows, ETHERTYPE_TABLE, PPP_TABLE)
        network_headers(rows, PROTOCOL_TABLE)
        aside = transport_headers(rows)
        if not aside or not enter_tunnels(rows, octets, base):
            return aside > 0


@dataclass(slots=True)
class Path:
    """All that one recording needs to remember between batches."""

    table: FlowTable = field(default_factory=FlowTable)
    slow: SlowPath = field(default_factory=SlowPath)
    fragments: Fragments = field(default_factory=Fragments)
    damage: list[Damage] = field(default_factory=list)
    tally: NDArray[np.int64] = field(default_factory=lambda: np.zeros(LAYERS, np.int64))
    told: set[tuple[str, int]] = field(default_factory=set)
    listed: Flows | None = None

    def flows(self) -> Flows:
        """All flows so far; made anew only when there are more."""
        if self.listed is None or len(self.listed) < self.table.count:
            self.listed = self.table.flows()
        return self.listed

    def skipped(self) -> dict[str, int]:
        """Frames left out so far, by reason."""
        return {reason: int(self.tally[layer]) for layer, reason in REASONS.items() if self.tally[layer]}

    def decode(self, frames: Frames, capture: str) -> list[Packets]:
        """Packets of one batch, and those put together from its last fragments."""
        batches: list[Packets] = []
        source = _of_frames(frames, capture)
        for _ in range(MOST_NESTED):
            packets, datagrams = self._take(source)
            if len(packets):
                batches.append(packets)
            if not datagrams:
                break
            source = _of_datagrams(datagrams, capture)
        return batches

    def finish(self) -> list[Packets]:
        """Give up what is incomplete."""
        self.fragments.give_up_all()
        lost = self.fragments.first_lost
        if lost is not None:
            what = (
                f"{self.fragments.lost} datagrams lack fragments, or have some that overlap; the first one begins here"
            )
            self.damage.append(Damage(lost.capture, lost.offset, what, "these datagrams"))
            self.fragments.first_lost = None
        return []

    def _take(self, source: Source) -> tuple[Packets, list[Datagram]]:
        base = address(source.octets)
        columns = Columns.empty(len(source.start))
        datagrams: list[Datagram] = []
        crowded = self.tally[TOO_MANY_FLOWS]
        for first in range(0, len(source.start), CHUNK):
            rows = source.rows(first, base)
            if take_headers(rows, source.octets, base):
                self._read_rare(rows, source, first, base)
                self._read_fragments(rows, source, first, base, datagrams)
            self.table.write(rows, base, first, columns, self.tally)
        if self.tally[TOO_MANY_FLOWS] > crowded:
            self._tell(source, 0, TOO_MANY_FLOWS, f"more than {self.table.most} flows", "packets of further flows")
        return _packets(source, columns), datagrams

    def _read_rare(self, rows: Rows, source: Source, first: int, base: Address) -> None:
        """Let the slow path find IP headers, then take the headers from there on."""
        while len(left := np.flatnonzero(rows["layer"] == RARE)):
            for index in left.tolist():
                self._find_ip(rows[index : index + 1], source, first + index, base)
            take_headers(rows, source.octets, base)

    def _find_ip(self, row: Rows, source: Source, index: int, base: Address) -> None:
        if row["network_at"][0]:
            row["layer"] = NOT_IP  # inside a packet already, where scapy would find the outer header again
            return
        start, captured = int(source.start[index]), int(source.captured[index])
        at = int(row["at"][0]) - base
        sort = int.from_bytes(source.octets[at - 2 : at].tobytes(), "big") if at > start else 0
        link_type = source.link_types[source.interface[index]]
        frame = source.octets[start : start + min(captured, SLOW_PATH_OCTETS)].tobytes()
        layer, place, vlan = self.slow.find_ip(frame, link_type, sort)
        row["layer"], row["at"], row["vlan"] = layer, base + start + place, vlan
        if layer == UNKNOWN_LINK:
            self._tell(
                source, index, link_type, f"link type {link_type}, which is not known", "all frames of that type"
            )
        elif layer == SLOW_PATH_FULL:
            what = "more frames of unusual encapsulations than are read one by one"
            self._tell(source, index, -1, what, "packets in the rest of such frames")

    def _tell(self, source: Source, index: int, topic: int, what: str, lost: str) -> None:
        """Add a damage row, once for each file and topic."""
        if (source.capture, topic) not in self.told:
            self.told.add((source.capture, topic))
            self.damage.append(Damage(source.capture, int(source.start[index]), what, lost))

    def _read_fragments(self, rows: Rows, source: Source, first: int, base: Address, datagrams: list[Datagram]) -> None:
        """Hand fragments over, and take the datagrams that they complete."""
        for index in np.flatnonzero(rows["layer"] == FRAGMENT).tolist():
            row = rows[index]
            start, end, limit = int(row["network_at"]), int(row["end"]), int(row["limit"])
            packet = source.octets[start - base : min(end, limit) - base].tobytes()
            fragment = read_fragment(packet, end - start, packet[0] >> 4, int(row["at"]) - start)
            if fragment is None:
                row["layer"] = MALFORMED
                continue
            datagram = self.fragments.add(fragment, source.arrival(first + index, int(row["vlan"])))
            if datagram is not None:
                datagrams.append(datagram)
