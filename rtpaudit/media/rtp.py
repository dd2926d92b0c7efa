"""RTP headers as columns (RFC 3550, 5.1), grouped by flow and SSRC.

Packets whose first octets may be RTP come in; rows grouped by (flow, SSRC) in order of arrival go out. Whether a group
is RTP at all is told in ``recognise``.
"""

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtpaudit.decode.packets import Kind, Packets
from rtpaudit.kernels import kernel


@dataclass(slots=True)
class RtpRows:
    """One row a packet, columns of shape (n,); ``fingerprint`` tells copies from other packets of the same number."""

    time_ns: NDArray[np.int64]
    frame: NDArray[np.int64]
    buffer: NDArray[np.uint16]
    start: NDArray[np.int64]
    length: NDArray[np.int32]
    captured: NDArray[np.int32]
    sequence: NDArray[np.uint16]
    timestamp: NDArray[np.uint32]
    payload_type: NDArray[np.uint8]
    marker: NDArray[np.bool_]
    dscp: NDArray[np.uint8]
    ttl: NDArray[np.uint8]
    ip_id: NDArray[np.uint16]
    vlan: NDArray[np.uint16]
    interface: NDArray[np.uint16]
    fingerprint: NDArray[np.uint32]

    def __len__(self) -> int:
        return len(self.time_ns)


@dataclass(slots=True)
class Groups:
    """Rows sorted by group, in order of arrival in each; group ``g`` has rows ``bounds[g]`` to ``bounds[g + 1]``."""

    rows: RtpRows
    bounds: NDArray[np.int64]
    flow: NDArray[np.int32]
    ssrc: NDArray[np.uint32]

    def __len__(self) -> int:
        return len(self.flow)


COLUMNS = tuple(one.name for one in fields(RtpRows))


class RtpCollector:
    """Gathers the RTP rows of one recording batch by batch."""

    def __init__(self) -> None:
        self._chunks: dict[str, list[NDArray[Any]]] = {name: [] for name in (*COLUMNS, "group")}
        self._table = np.full(1 << 12, -1, np.int32)
        self._keys = np.empty(1 << 11, np.uint64)
        self._groups = 0

    def add(self, packets: Packets, buffer: int) -> None:
        """Take the rows of kind RTP whose header holds together; ``buffer`` numbers the octets they lie in."""
        chosen = np.flatnonzero(packets.kind == Kind.RTP)
        if not len(chosen):
            return
        n = len(chosen)
        header = np.zeros(n, np.int32)
        padding = np.zeros(n, np.int32)
        sequence, timestamp = np.empty(n, np.uint16), np.empty(n, np.uint32)
        second, fingerprint = np.empty(n, np.uint8), np.empty(n, np.uint32)
        group = np.empty(n, np.int32)
        done = 0
        while done < n:
            done, self._groups = _read_headers(
                packets.octets,
                packets.start,
                packets.length,
                packets.captured,
                packets.flow,
                chosen,
                done,
                self._table,
                self._keys,
                self._groups,
                header,
                padding,
                sequence,
                timestamp,
                second,
                fingerprint,
                group,
            )
            if done < n:
                self._grow()
        if (header == 0).any():
            good = np.flatnonzero(header)
            chosen, header, padding, group = chosen[good], header[good], padding[good], group[good]
            sequence, timestamp = sequence[good], timestamp[good]
            second, fingerprint = second[good], fingerprint[good]
        # Where every row is taken, as in most batches, the columns need no copy.
        taken: slice | NDArray[np.int64] = slice(None) if len(chosen) == len(packets) else chosen
        length = packets.length[taken] - header - padding
        rows = {
            "time_ns": packets.time_ns[taken],
            "frame": packets.frame[taken],
            "buffer": np.full(len(chosen), buffer, np.uint16),
            "start": packets.start[taken] + header,
            "length": length,
            "captured": np.minimum(np.maximum(packets.captured[taken] - header, 0), length),
            "sequence": sequence,
            "timestamp": timestamp,
            "payload_type": second & np.uint8(0x7F),
            "marker": second >= 0x80,
            "dscp": packets.dscp[taken],
            "ttl": packets.ttl[taken],
            "ip_id": packets.ip_id[taken],
            "vlan": packets.vlan[taken],
            "interface": packets.interface[taken],
            "fingerprint": fingerprint,
            "group": group,
        }
        for name, column in rows.items():
            self._chunks[name].append(column)

    def _grow(self) -> None:
        keys = np.empty(2 * len(self._keys), np.uint64)
        keys[: self._groups] = self._keys[: self._groups]
        self._keys = keys
        self._table = np.full(4 * len(keys), -1, np.int32)
        _fill_table(self._table, self._keys, self._groups)

    def finish(self) -> Groups:
        """All rows, grouped. The collector is empty afterwards, so that no column is held twice."""
        keys = self._keys[: self._groups]
        groups = _joined(self._chunks.pop("group"), np.dtype(np.int32))
        order, bounds = _group_order(groups, self._groups)
        del groups
        columns = {}
        for one in fields(RtpRows):
            whole = _joined(self._chunks.pop(one.name), _DTYPES[one.name])
            columns[one.name] = whole[order]
        flow, ssrc = (keys >> np.uint64(32)).astype(np.int32), keys.astype(np.uint32)
        return Groups(RtpRows(**columns), bounds, flow, ssrc)


_DTYPES = {
    name: np.dtype(kind)
    for kind, names in {
        "i8": ("time_ns", "frame", "start"),
        "i4": ("length", "captured"),
        "u4": ("timestamp", "fingerprint"),
        "u2": ("buffer", "sequence", "ip_id", "vlan", "interface"),
        "u1": ("payload_type", "dscp", "ttl"),
        "?": ("marker",),
    }.items()
    for name in names
}


def _joined(chunks: Sequence[NDArray[Any]], dtype: np.dtype[Any]) -> NDArray[Any]:
    if not chunks:
        return np.empty(0, dtype)
    return np.concatenate(chunks) if len(chunks) > 1 else chunks[0]


def selected(groups: Groups, keep: NDArray[np.bool_]) -> Groups:
    """The groups of a mask of shape (groups,), their rows packed together."""
    if keep.all():
        return groups
    sizes = np.diff(groups.bounds)
    rows = np.repeat(keep, sizes)
    columns = {name: getattr(groups.rows, name)[rows] for name in COLUMNS}
    bounds = np.concatenate([[0], np.cumsum(sizes[keep])]).astype(np.int64)
    return Groups(RtpRows(**columns), bounds, groups.flow[keep], groups.ssrc[keep])


def merge_interfaces(groups: Groups) -> None:
    """Put rows of one file that came over several interfaces into order of time, each interface's own order kept."""
    rows, bounds = groups.rows, groups.bounds
    if not len(rows):
        return
    changes = np.flatnonzero((rows.interface[1:] != rows.interface[:-1]) & (rows.buffer[1:] == rows.buffer[:-1])) + 1
    inside = changes[np.isin(changes, bounds, invert=True)]
    for group in np.unique(np.searchsorted(bounds, inside, side="right") - 1):
        first, last = bounds[group], bounds[group + 1]
        order = first + _merged_order(rows.time_ns[first:last], rows.interface[first:last], rows.buffer[first:last])
        for name in COLUMNS:
            column = getattr(rows, name)
            column[first:last] = column[order]


def _merged_order(
    time_ns: NDArray[np.int64], interface: NDArray[np.uint16], buffer: NDArray[np.uint16]
) -> NDArray[np.int64]:
    """Order of a merge by time. An interface whose clock runs back keeps its order: its running maximum is the key."""
    reached = time_ns.copy()
    for one in np.unique(interface):
        mine = np.flatnonzero(interface == one)
        reached[mine] = np.maximum.accumulate(time_ns[mine])
    file_turn = np.concatenate([[0], np.cumsum(buffer[1:] != buffer[:-1])])
    return np.lexsort((np.arange(len(time_ns)), reached, file_turn))


@kernel
def _hash(key: Any) -> Any:
    key = (key ^ (key >> np.uint64(33))) * np.uint64(0xFF51AFD7ED558CCD)
    return key ^ (key >> np.uint64(29))


@kernel
def _fill_table(table: NDArray[np.int32], keys: NDArray[np.uint64], count: int) -> None:
    mask = np.uint64(len(table) - 1)
    for number in range(count):
        slot = _hash(keys[number]) & mask
        while table[slot] >= 0:
            slot = (slot + np.uint64(1)) & mask
        table[slot] = number


@kernel
def _read_headers(
    octets: NDArray[np.uint8],
    start: NDArray[np.int64],
    length: NDArray[np.int32],
    captured: NDArray[np.int32],
    flow: NDArray[np.int32],
    chosen: NDArray[np.int64],
    done: int,
    table: NDArray[np.int32],
    keys: NDArray[np.uint64],
    groups: int,
    header: NDArray[np.int32],
    padding: NDArray[np.int32],
    sequence: NDArray[np.uint16],
    timestamp: NDArray[np.uint32],
    second: NDArray[np.uint8],
    fingerprint: NDArray[np.uint32],
    group: NDArray[np.int32],
) -> tuple[int, int]:
    """RFC 3550, 5.1 and 5.3.1. A header length of 0 marks a row that is no RTP; stops early when the keys are full."""
    mask = np.uint64(len(table) - 1)
    for i in range(done, len(chosen)):
        if groups >= len(keys):
            return i, groups
        row = chosen[i]
        at, size, there = start[row], length[row], captured[row]
        first = octets[at]
        head = 12 + 4 * (first & 15)
        if there >= head + 4 and first & 0x10:
            head += 4 + 4 * (octets[at + head + 2] * 256 + octets[at + head + 3])
        if head > size or there < 12:
            continue
        header[i] = head
        if first & 0x20 and there == size and size > head:
            pad = octets[at + size - 1]
            # An encrypted packet ends in its tag: a count that cannot be is taken for no padding.
            if 0 < pad <= size - head:
                padding[i] = pad
        second[i] = octets[at + 1]
        sequence[i] = octets[at + 2] * 256 + octets[at + 3]
        stamp = np.uint64(0)
        source = np.uint64(0)
        for k in range(4):
            stamp = (stamp << np.uint64(8)) | np.uint64(octets[at + 4 + k])
            source = (source << np.uint64(8)) | np.uint64(octets[at + 8 + k])
        timestamp[i] = np.uint32(stamp)
        mixed = np.uint64(size)
        for k in range(head, min(head + 8, there)):
            mixed = (mixed * np.uint64(257)) ^ np.uint64(octets[at + k])
        for k in range(max(head, there - 8), there):
            mixed = (mixed * np.uint64(257)) ^ np.uint64(octets[at + k])
        fingerprint[i] = np.uint32(_hash(mixed) & np.uint64(0xFFFFFFFF))
        key = (np.uint64(flow[row]) << np.uint64(32)) | source
        slot = _hash(key) & mask
        while table[slot] >= 0 and keys[table[slot]] != key:
            slot = (slot + np.uint64(1)) & mask
        if table[slot] < 0:
            keys[groups] = key
            table[slot] = groups
            groups += 1
        group[i] = table[slot]
    return len(chosen), groups


@kernel
def _group_order(group: NDArray[np.int32], groups: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Stable counting sort: the order of rows, and the bounds of each group."""
    bounds = np.zeros(groups + 1, np.int64)
    for one in group:
        bounds[one + 1] += 1
    for i in range(groups):
        bounds[i + 1] += bounds[i]
    order = np.empty(len(group), np.int64)
    filled = bounds[:-1].copy()
    for i in range(len(group)):
        order[filled[group[i]]] = i
        filled[group[i]] += 1
    return order, bounds
