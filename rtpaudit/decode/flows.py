"""Numbers the flows by first packet and writes the packets' columns: finished rows in, columns of ``Packets`` out."""

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from rtpaudit.decode.layers import PACKET, TOO_MANY_FLOWS, Row, Rows
from rtpaudit.decode.octets import Address, u8, u32, u64
from rtpaudit.decode.packets import Flows
from rtpaudit.kernels import inlined, kernel

MAX_FLOWS = 4_000_000
"""Flows of one recording. Beyond, their packets are left out and the audit says so."""

SLOTS = 1 << 23
"""At least twice the flows, so that runs of taken slots stay short."""

MAX_PROBES = 512
"""Longest run of slots looked at. Good hashes stay far below; made-up addresses must not turn the table into a list."""

FLOW = np.dtype([(name, np.uint64) for name in ("source", "source_low", "destination", "destination_low", "rest")])
"""Addresses, an IPv4 one in the upper half of its first word; ports, version and protocol in ``rest``."""

FlowRows = NDArray[np.void]
"""array of ``FLOW``"""


class FlowRow(Protocol):
    """One flow as kernels see it: a reference into the array."""

    source: int
    source_low: int
    destination: int
    destination_low: int
    rest: int


@dataclass(slots=True)
class Columns:
    """Room for the packets of one batch, filled from the front."""

    longs: NDArray[np.int64]
    """index of the frame in the batch; first octet"""
    numbers: NDArray[np.int32]
    """flow; length; captured"""
    shorts: NDArray[np.uint16]
    """IPv4 identification; VLAN"""
    octets: NDArray[np.uint8]
    """kind; DSCP; time to live"""
    count: int = 0

    @classmethod
    def empty(cls, count: int) -> "Columns":
        """Room for ``count`` packets."""
        return cls(
            np.empty((2, count), np.int64),
            np.empty((3, count), np.int32),
            np.empty((2, count), np.uint16),
            np.empty((3, count), np.uint8),
        )


@inlined
def _ports(row: Row) -> int:
    """Both ports as one number, 0 where there are none."""
    if row.protocol == 17:
        return u32(row.at - 8)
    return u32(row.at) if row.protocol == 6 else 0


@inlined
def _read_flow(row: Row, flow: FlowRow) -> None:
    """Fill a flow from the headers of a packet."""
    at = row.network_at
    version = u8(at) >> 4
    if version == 4:
        flow.source = u32(at + 12) << 32
        flow.source_low = 0
        flow.destination = u32(at + 16) << 32
        flow.destination_low = 0
    else:
        flow.source = u64(at + 8)
        flow.source_low = u64(at + 16)
        flow.destination = u64(at + 24)
        flow.destination_low = u64(at + 32)
    flow.rest = _ports(row) << 32 | version << 8 | row.protocol


@inlined
def _mixed(before: np.uint64, word: np.uint64) -> np.uint64:
    """A hash with one more word in it: a multiplication carries bits up, a shift carries them down."""
    after = (before ^ word) * np.uint64(0xFF51AFD7ED558CCD)
    return after ^ (after >> np.uint64(32))


@inlined
def _first_slot(flow: FlowRow) -> np.int64:
    """Slot at which the search for a flow starts."""
    mixed = _mixed(np.uint64(0x9E3779B97F4A7C15), np.uint64(flow.source))
    mixed = _mixed(mixed, np.uint64(flow.source_low))
    mixed = _mixed(mixed, np.uint64(flow.destination))
    mixed = _mixed(mixed, np.uint64(flow.destination_low))
    mixed = _mixed(mixed, np.uint64(flow.rest))
    return np.int64(mixed & np.uint64(SLOTS - 1))


@inlined
def _same(one: FlowRow, other: FlowRow) -> bool:
    """Whether two flows are the same."""
    return (
        one.rest == other.rest
        and one.source == other.source
        and one.destination == other.destination
        and one.source_low == other.source_low
        and one.destination_low == other.destination_low
    )


@kernel
def _write_packets(
    rows: Rows,
    base: Address,
    first: int,
    slots: NDArray[np.int32],
    known: FlowRows,
    most: int,
    counts: NDArray[np.int64],
    tally: NDArray[np.int64],
    longs: NDArray[np.int64],
    numbers: NDArray[np.int32],
    shorts: NDArray[np.uint16],
    small: NDArray[np.uint8],
) -> None:
    """Write packets from row ``counts[2]`` on until done, or until ``known`` is full but for the place used for asking.

    ``counts`` are flows, packets and rows so far; ``tally`` counts the rows that are no packets by layer.
    """
    flows, packets, index = counts[0], counts[1], counts[2]
    while index < len(rows) and flows < len(known):
        row = rows[index]
        index += 1
        if row.layer != PACKET:
            tally[row.layer] += 1
            continue
        asked = known[flows]
        _read_flow(row, asked)
        slot = _first_slot(asked)
        flow = np.int64(-1)
        for _ in range(MAX_PROBES):
            flow = np.int64(slots[slot]) - 1
            if flow < 0 or _same(known[flow], asked):
                break
            slot = (slot + 1) & (SLOTS - 1)
            flow = np.int64(-2)
        if flow == -2 or (flow == -1 and flows >= most):
            tally[TOO_MANY_FLOWS] += 1
            continue
        if flow == -1:
            flow = flows
            flows += 1
            slots[slot] = flows
        longs[0, packets] = first + index - 1
        longs[1, packets] = row.at - base
        numbers[0, packets] = flow
        numbers[1, packets] = row.end - row.at
        numbers[2, packets] = max(min(row.end, row.limit) - row.at, 0)
        shorts[0, packets] = row.ip_id
        shorts[1, packets] = row.vlan
        small[0, packets] = row.kind
        small[1, packets] = row.dscp
        small[2, packets] = row.ttl
        packets += 1
    counts[0], counts[1], counts[2] = flows, packets, index


@dataclass(slots=True)
class FlowTable:
    """All flows of a recording: a hash table whose pages are only touched where flows are."""

    most: int = MAX_FLOWS
    count: int = 0
    slots: NDArray[np.int32] = field(default_factory=lambda: np.zeros(SLOTS, np.int32))
    """flow number plus one, 0 where free"""
    known: FlowRows = field(default_factory=lambda: np.zeros(1024, FLOW))
    """the flows, and after them at least one place that the next packet's flow is read into"""

    def write(self, rows: Rows, base: Address, first: int, columns: Columns, tally: NDArray[np.int64]) -> None:
        """Append the packets among ``rows``, frames ``first`` and on, to ``columns``; the other rows to ``tally``."""
        counts = np.array([self.count, columns.count, 0], np.int64)
        while counts[2] < len(rows):
            if counts[0] == len(self.known):
                self.known = np.concatenate([self.known, np.zeros_like(self.known)])
            _write_packets(
                rows,
                base,
                first,
                self.slots,
                self.known,
                self.most,
                counts,
                tally,
                columns.longs,
                columns.numbers,
                columns.shorts,
                columns.octets,
            )
        self.count, columns.count = int(counts[0]), int(counts[1])

    def flows(self) -> Flows:
        """The flows as the other rooms read them."""
        words = self.known[: self.count].view(np.uint64).reshape(-1, 5)
        addresses = words[:, :4].astype(">u8").view(np.uint8)
        rest = words[:, 4]
        return Flows(
            source=addresses[:, :16],
            destination=addresses[:, 16:],
            source_port=(rest >> 48).astype(np.uint16),
            destination_port=(rest >> 32).astype(np.uint16),
            version=(rest >> 8).astype(np.uint8),
            protocol=rest.astype(np.uint8),
        )
