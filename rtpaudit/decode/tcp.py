"""TCP octets in order, for signalling: batches of packets come in, chunks of those directions that are wanted go out.

A direction is a flow. Its first octets, in order, decide whether it is wanted; where the capture starts in the middle
of a connection, the starts of a few segments do. Segments may be repeated, overlapping, out of order or missing. A hole
stays open as long as memory and capture time allow, then it is given up: the next chunk tells of a gap before it.
"""

from bisect import insort
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.decode.packets import Packets
from rtpaudit.decode.segments import Segment, read_segments
from rtpaudit.units import NS_PER_S

MAX_WAIT_NS = 10 * NS_PER_S
"""How long a hole may stay open, by capture time. Lost segments come again after seconds (RFC 6298, from memory)."""

MAX_WAITING_OCTETS = 256 << 10
"""Octets behind a hole in one direction. Signalling messages are far shorter."""

SEGMENT_COST = 256
"""What a waiting segment takes besides its octets."""

MAX_WAITING_SEGMENTS = 512
"""Segments behind a hole in one direction."""

MAX_WAITING_IN_ALL = 32 << 20
"""Octets behind holes in all directions."""

MAX_DIRECTIONS = 65_536
"""Directions that are followed, or on trial, at a time."""

MAX_JUMP = 4 << 20
"""A sequence number further off than this belongs to another connection between the same ports."""

TRIALS = 8
"""Segments without interest after which a direction that was met in the middle is left alone."""

LOOKED_AT = 64
"""Octets that ``wanted`` is shown."""

ENOUGH = 16
"""Octets after which a no counts: a first segment may be as short as one octet."""


@dataclass(frozen=True, slots=True)
class TcpChunk:
    """Octets of one direction, next in stream order."""

    flow: int
    time_ns: int
    """arrival of the segment that completed them: a late one brings all that waited behind it"""
    frame: int
    """frame of that segment"""
    octets: bytes
    gap_before: bool
    """octets are missing before these: lost by the capture, cut by it, or before its start"""


@dataclass(slots=True)
class _Direction:
    next: int
    gap: bool
    """whether there is one before the next octets"""
    trials: int
    """segments that may still be without interest"""
    chosen: bool = False
    early: list[TcpChunk] = field(default_factory=list)
    """what came before there was enough to decide"""
    waiting: list[Segment] = field(default_factory=list)
    held: int = 0
    since_ns: int = 0
    """when the hole opened"""

    def position(self, sequence: int) -> int:
        """Sequence number as a position in the stream, the nearest to what is expected."""
        return self.next + (sequence - self.next + (1 << 31)) % (1 << 32) - (1 << 31)


@dataclass(slots=True)
class TcpStreams:
    """The directions of a recording's TCP flows that carry what is wanted.

    Attributes
    ----------
    wanted : callable
        Told the first octets of a direction (at most 64), whether to follow it. Empty lines before them, which keep
        connections alive, are left out.
    gaps : int
        Holes given up in directions that were followed.
    crowded : int
        Directions left alone because too many were followed already.
    """

    wanted: Callable[[bytes], bool]
    gaps: int = 0
    crowded: int = 0
    _directions: dict[int, _Direction] = field(default_factory=dict)
    _on_trial: dict[int, None] = field(default_factory=dict)
    """flows not decided yet, oldest first"""
    _waiting: dict[int, _Direction] = field(default_factory=dict)
    """those with a hole, oldest first"""
    _held: int = 0
    _refused: NDArray[np.bool_] = field(default_factory=lambda: np.zeros(1024, np.bool_))
    """by flow"""
    _opened: NDArray[np.int64] = field(default_factory=lambda: np.full(1024, -1, np.int64))
    """by flow: sequence number of the first octet, where a SYN told it"""

    def add(self, packets: Packets) -> list[TcpChunk]:
        """Chunks that the TCP segments of a batch complete."""
        chunks: list[TcpChunk] = []
        self._make_room(int(packets.flow.max(initial=-1)) + 1)
        for flow, opens, segment in read_segments(packets, self._refused):
            if opens:
                chunks += self._open(flow, segment.start)
            if segment.length and not self._refused[flow]:
                chunks += self._take(flow, segment)
            if self._waiting:
                chunks += self._give_up_old(segment.time_ns)
        return chunks

    def finish(self) -> list[TcpChunk]:
        """What still waits behind holes."""
        return [chunk for flow in list(self._waiting) for chunk in self._give_up_all(flow)]

    def _make_room(self, flows: int) -> None:
        if flows > len(self._refused):
            room = max(flows, 2 * len(self._refused))
            self._refused = np.concatenate([self._refused, np.zeros(room - len(self._refused), np.bool_)])
            self._opened = np.concatenate([self._opened, np.full(room - len(self._opened), -1, np.int64)])

    def _open(self, flow: int, start: int) -> list[TcpChunk]:
        """Begin a connection, unless the SYN is that of the one that goes on: a copy of it, or late."""
        direction = self._directions.get(flow)
        goes_on = direction is not None and (direction.next - start) % (1 << 32) <= MAX_JUMP
        if self._opened[flow] == start or goes_on:
            return []
        chunks = self._give_up_all(flow)
        if flow in self._directions:
            self._forget(flow)
        self._opened[flow] = start
        self._refused[flow] = False
        return chunks

    def _take(self, flow: int, segment: Segment) -> list[TcpChunk]:
        direction = self._directions.get(flow)
        chunks: list[TcpChunk] = []
        if direction is not None:
            segment.start = direction.position(segment.start)
            if abs(segment.start - direction.next) > MAX_JUMP:
                chunks = self._give_up_all(flow)
                if self._refused[flow]:
                    return chunks
                direction.next, direction.gap = segment.start, True
        else:
            direction = self._begin(flow, segment.start)
            if direction is None:
                return []
            segment.start = direction.position(segment.start)
        if segment.start <= direction.next:
            return chunks + self._deliver(flow, direction, segment)
        self._hold(flow, direction, segment)
        if (
            direction.held > MAX_WAITING_OCTETS
            or len(direction.waiting) > MAX_WAITING_SEGMENTS
            or self._held > MAX_WAITING_IN_ALL
        ):
            chunks += self._give_up_hole(flow, segment.time_ns)
        return chunks

    def _begin(self, flow: int, sequence: int) -> _Direction | None:
        if len(self._directions) >= MAX_DIRECTIONS:
            if not self._on_trial:
                self.crowded += 1
                self._refused[flow] = True
                return None
            self._refuse(next(iter(self._on_trial)))
        opened = int(self._opened[flow])
        known = opened >= 0 and (sequence - opened) % (1 << 32) <= MAX_JUMP
        direction = _Direction(opened, False, 1) if known else _Direction(sequence, True, TRIALS)
        self._directions[flow] = direction
        self._on_trial[flow] = None
        return direction

    def _refuse(self, flow: int) -> None:
        self._forget(flow)
        self._refused[flow] = True

    def _forget(self, flow: int) -> None:
        direction = self._directions.pop(flow)
        self._on_trial.pop(flow, None)
        self._waiting.pop(flow, None)
        self._held -= direction.held
        direction.waiting.clear()
        direction.held = 0

    def _hold(self, flow: int, direction: _Direction, segment: Segment) -> None:
        insort(direction.waiting, segment)
        direction.held += len(segment.octets) + SEGMENT_COST
        self._held += len(segment.octets) + SEGMENT_COST
        if flow not in self._waiting:
            self._wait(flow, direction, segment.time_ns)

    def _wait(self, flow: int, direction: _Direction, since_ns: int) -> None:
        """Take a direction's place among those with a hole anew."""
        self._waiting.pop(flow, None)
        if direction.waiting:
            direction.since_ns = since_ns
            self._waiting[flow] = direction

    def _deliver(self, flow: int, direction: _Direction, segment: Segment) -> list[TcpChunk]:
        """Hand out a segment that is next, and whatever waited for it, all at the arrival of that segment."""
        chunks = self._hand_out(flow, direction, segment, segment.time_ns, segment.frame)
        if direction.waiting and direction.waiting[0].start <= direction.next:
            while direction.waiting and direction.waiting[0].start <= direction.next:
                chunks += self._hand_out(flow, direction, self._next(direction), segment.time_ns, segment.frame)
            self._wait(flow, direction, segment.time_ns)
        return chunks

    def _next(self, direction: _Direction) -> Segment:
        segment = direction.waiting.pop(0)
        direction.held -= len(segment.octets) + SEGMENT_COST
        self._held -= len(segment.octets) + SEGMENT_COST
        return segment

    def _hand_out(self, flow: int, direction: _Direction, segment: Segment, time_ns: int, frame: int) -> list[TcpChunk]:
        end = segment.start + segment.length
        if end <= direction.next:
            return []
        octets = segment.octets[direction.next - segment.start :]
        chunk = TcpChunk(flow, time_ns, frame, octets, direction.gap)
        direction.next = end
        direction.gap = segment.start + len(segment.octets) < end or (direction.gap and not octets)
        if not octets:
            return []
        return [chunk] if direction.chosen else self._try(flow, direction, chunk)

    def _try(self, flow: int, direction: _Direction, chunk: TcpChunk) -> list[TcpChunk]:
        """Decide whether the direction is wanted, as soon as there is enough of it."""
        direction.early.append(chunk)
        early = direction.early
        head = b"".join(each.octets[:LOOKED_AT] for each in early).lstrip(b"\r\n")[:LOOKED_AT]
        if head and self.wanted(head):
            direction.chosen, direction.early = True, []
            del self._on_trial[flow]
            return early
        if len(head) >= ENOUGH or len(early) > ENOUGH:
            direction.early = []
            direction.gap = True
            direction.trials -= 1
            if direction.trials == 0:
                self._refuse(flow)
        return []

    def _give_up_old(self, now_ns: int) -> list[TcpChunk]:
        """Give up the holes that have been open for too long."""
        chunks: list[TcpChunk] = []
        while self._waiting:
            flow, direction = next(iter(self._waiting.items()))
            if now_ns - direction.since_ns <= MAX_WAIT_NS:
                break
            chunks += self._give_up_hole(flow, now_ns)
        return chunks

    def _give_up_all(self, flow: int) -> list[TcpChunk]:
        chunks: list[TcpChunk] = []
        while flow in self._waiting:
            chunks += self._give_up_hole(flow, self._waiting[flow].since_ns)
        return chunks

    def _give_up_hole(self, flow: int, now_ns: int) -> list[TcpChunk]:
        """Go on behind the hole; each segment that waited keeps its own arrival."""
        direction = self._waiting[flow]
        self.gaps += direction.chosen
        direction.next, direction.gap = direction.waiting[0].start, True
        chunks: list[TcpChunk] = []
        while direction.waiting and direction.waiting[0].start <= direction.next:
            segment = self._next(direction)
            chunks += self._hand_out(flow, direction, segment, segment.time_ns, segment.frame)
        self._wait(flow, direction, now_ns)
        return chunks
