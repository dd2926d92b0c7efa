"""Calls come in, the frames that carry them go out: signalling, media, and what goes beside the media.

RTP is chosen stream by stream, RTCP, STUN, keys and the like by the places that were announced or used, messages one by
one; of a TCP connection that carries other calls as well only the segments that hold a wanted message.
"""

from bisect import bisect_left
from collections import defaultdict
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture import Recording
from rtpaudit.decode import Decoder, Flows, Kind
from rtpaudit.decode.icmp import quoted
from rtpaudit.decode.packets import Packets
from rtpaudit.media.agreed import AFTER_NS, BEFORE_NS
from rtpaudit.media.calls import Call
from rtpaudit.signalling.calls import SignallingMessage
from rtpaudit.signalling.quality_reports import QualityReport

UDP, TCP = 17, 6
Place = tuple[str, int]
"""address and port"""
FILE = 1 << 40
"""Frames of a recording are numbered through: the file's number times this, plus the number within the file."""


class Heard(Protocol):
    """What was heard of one recording, calls that are not wanted included."""

    @property
    def recording(self) -> Recording:
        """Its files."""

    @property
    def flows(self) -> Flows:
        """Numbered as packets of these files are whenever they are decoded."""

    @property
    def calls(self) -> list[Call]:
        """All of them."""

    @property
    def messages(self) -> list[SignallingMessage]:
        """All of them."""

    @property
    def quality_reports(self) -> list[QualityReport]:
        """Reports in SIP bodies."""


def frames_of(legs: Sequence[Call], heard: Heard) -> list[NDArray[np.int64]]:
    """Numbers of the frames that carry some calls of one recording: for each file, in order, each once."""
    wanted = _Wanted(legs, heard)
    decoder = Decoder(note_fragments=True)
    found: list[list[NDArray[np.int64]]] = [[] for _ in heard.recording.files]
    for number, file in enumerate(heard.recording.files):
        for frames in file.batches():
            for packets in decoder.decode(frames, str(number)):
                numbers = wanted.frames(packets, number)
                if packets.octets is frames.octets:
                    found[number].append(numbers)
                    continue
                # What came in fragments may have begun in an earlier file.
                for where, one in (
                    place for last in numbers.tolist() for place in decoder.frames_of(str(number), last)
                ):
                    found[int(where)].append(np.array([one], np.int64))
    return [np.unique(np.concatenate([np.empty(0, np.int64), *parts])) for parts in found]


class _Wanted:
    """Tells which packets belong to some calls of one recording."""

    def __init__(self, legs: Sequence[Call], heard: Heard) -> None:
        self._legs_at: dict[Place, list[Call]] = defaultdict(list)
        for leg in legs:
            for place in _places(leg):
                self._legs_at[place].append(leg)
        self._files = {file.name: number for number, file in enumerate(heard.recording.files)}
        self._media, self._beside = _Spans(), _Spans()
        self._note_flows(legs, heard)
        self._text: set[int] = set()
        self._segments: dict[int, _Segments] = {}
        self._note_messages({id(message): message for message in self._messages(legs, heard)}, heard)

    def frames(self, packets: Packets, file: int) -> NDArray[np.int64]:
        """Numbers of the frames of a batch that are wanted."""
        kind = packets.kind
        media, beside = (spans.holds(packets.flow, packets.time_ns) for spans in (self._media, self._beside))
        chosen = np.where(kind == Kind.RTP, media, beside & (kind != Kind.TEXT))
        for row in np.flatnonzero(kind == Kind.TEXT).tolist() if self._text else ():
            chosen[row] = file * FILE + int(packets.frame[row]) in self._text
        for row in np.flatnonzero(kind == Kind.TCP).tolist() if self._segments else ():
            segments = self._segments.get(int(packets.flow[row]))
            chosen[row] = segments is not None and segments.hold(file * FILE + int(packets.frame[row]))
        errors = [
            error.frame
            for error in quoted(packets)
            if self._about((error.source, error.source_port), error.time_ns)
            or self._about((error.destination, error.destination_port), error.time_ns)
        ]
        return np.concatenate([packets.frame[chosen], np.array(errors, np.int64)])

    def _about(self, place: Place, time_ns: int) -> bool:
        """Whether a place was one of a wanted call's at a time."""
        spans = (_span(leg) for leg in self._legs_at.get(place, ()))
        return any(begin <= time_ns <= end for begin, end in spans)

    def _note_flows(self, legs: Sequence[Call], heard: Heard) -> None:
        for stream in (stream for leg in legs for stream in leg.streams):
            self._media.add(stream.flow, int(stream.packets.time_ns.min()), int(stream.packets.time_ns.max()))
        own = {id(leg) for leg in legs}
        taken = {stream.flow for call in heard.calls for stream in call.streams}
        foreign = {stream.flow for call in heard.calls if id(call) not in own for stream in call.streams}
        flows = heard.flows
        for flow in np.flatnonzero(flows.protocol == UDP).tolist():
            ends = (
                (flows.source_text(flow), int(flows.source_port[flow])),
                (flows.destination_text(flow), int(flows.destination_port[flow])),
            )
            for leg in {id(leg): leg for end in ends for leg in self._legs_at.get(end, ())}.values():
                if flow not in foreign:
                    self._beside.add(flow, *_span(leg))
                # RTP that makes no stream of a call: video, or a few packets.
                if flow not in taken:
                    self._media.add(flow, leg.started_ns, leg.ended_ns)

    def _messages(self, legs: Sequence[Call], heard: Heard) -> Iterator[SignallingMessage]:
        """Messages of the calls, of gateways about their media, and reports on it."""
        call_ids = set()
        for leg in legs:
            if leg.signalled is not None:
                call_ids.add(leg.signalled.call_id)
                yield from leg.signalled.messages
        for message in heard.messages:
            sections = message.description.media if message.protocol != "SIP" and message.description else ()
            if any(self._about((section.address, section.port), message.time_ns) for section in sections):
                yield message
        carried = {(message.time_ns, message.source): message for message in heard.messages}
        for report in heard.quality_reports:
            ends = ((end.address, end.port) for end in (report.local_end, report.remote_end))
            named = {report.call_id, report.dialog_id} & call_ids
            if (named or any(self._about(end, report.time_ns) for end in ends)) and (
                found := carried.get((report.time_ns, report.source))
            ):
                yield found

    def _note_messages(self, own: dict[int, SignallingMessage], heard: Heard) -> None:
        by_flow: dict[int, list[SignallingMessage]] = defaultdict(list)
        for message in heard.messages:
            if message.transport == "UDP":
                if id(message) in own:
                    self._text.add(self._position(message, message.frame))
            else:
                by_flow[message.flow].append(message)
        pure = {flow for flow, messages in by_flow.items() if all(id(message) in own for message in messages)}
        mates = _mates(heard.flows, by_flow)
        for flow, messages in by_flow.items():
            if flow in pure and (mates[flow] in pure or mates[flow] not in by_flow):
                for each in (flow, mates[flow]):
                    self._segments[each] = _Segments(everything=True)
            elif any(id(message) in own for message in messages):
                self._segments.setdefault(flow, self._segments_of(messages, own))

    def _segments_of(self, messages: Sequence[SignallingMessage], own: dict[int, SignallingMessage]) -> "_Segments":
        """Frames that hold messages of one direction: those behind the message before, up to the one that ends it."""
        found = _Segments()
        last = before = -1
        placed = sorted(((self._position(one, one.frame), one) for one in messages), key=lambda pair: pair[0])
        for position, message in placed:
            if position != last:
                before, last = last, position
            if id(message) in own:
                found.add(before, position)
                # It may begin where the message before ended.
                found.alone.add(self._position(message, message.first_frame))
        return found

    def _position(self, message: SignallingMessage, frame: int) -> int:
        return self._files.get(message.capture, 0) * FILE + frame


@dataclass(slots=True)
class _Segments:
    """Which frames of one direction of a TCP connection are wanted."""

    everything: bool = False
    alone: set[int] = field(default_factory=set)
    _spans: list[tuple[int, int]] = field(default_factory=list)
    """last wanted frame, and the last one before that is not, in order"""

    def add(self, before: int, last: int) -> None:
        if not self._spans or self._spans[-1][0] != last:
            self._spans.append((last, before))

    def hold(self, position: int) -> bool:
        if self.everything or position in self.alone:
            return True
        at = bisect_left(self._spans, (position, -1))
        return at < len(self._spans) and self._spans[at][1] < position


class _Spans:
    """Spans of time by flow."""

    def __init__(self) -> None:
        self._of: dict[int, list[tuple[int, int]]] = defaultdict(list)
        self._table: NDArray[np.int64] | None = None

    def add(self, flow: int, from_ns: int, to_ns: int) -> None:
        """One more span, both ends within."""
        self._of[flow].append((from_ns, to_ns))
        self._table = None

    def holds(self, flow: NDArray[np.int32], time_ns: NDArray[np.int64]) -> NDArray[np.bool_]:
        """Whether each packet, by its flow and arrival, lies in a span. Shape (n,)."""
        if self._table is None:
            self._table = self._made()
        known = flow < self._table.shape[1]
        row = np.where(known, flow, 0)
        found = np.zeros(len(flow), np.bool_)
        for spans in self._table:
            found |= (spans[row, 0] <= time_ns) & (time_ns <= spans[row, 1])
        return np.asarray(found & known)

    def _made(self) -> NDArray[np.int64]:
        """Shape (spans of one flow at most, flows, 2); an empty span where a flow has fewer."""
        most = max(map(len, self._of.values()), default=0)
        table = np.zeros((most, max(self._of, default=0) + 1, 2), np.int64)
        table[:, :, 1] = -1
        for flow, spans in self._of.items():
            table[: len(spans), flow] = spans
        return table


def _span(leg: Call) -> tuple[int, int]:
    return leg.started_ns - BEFORE_NS, leg.ended_ns + AFTER_NS


def _places(leg: Call) -> set[Place]:
    """Where media and its control came from and went to, or were announced."""
    found: set[Place] = set()
    for stream in leg.streams:
        for address, port in ((stream.source, stream.source_port), (stream.destination, stream.destination_port)):
            found |= {(address, port), (address, port + 1)}
    for term in leg.signalled.media if leg.signalled else ():
        if term.port:
            found |= {(term.address, term.port), (term.rtcp_address or term.address, term.rtcp_port or term.port + 1)}
        found |= {(candidate.address, candidate.port) for candidate in term.candidates}
    return found


def _mates(flows: Flows, wanted: Iterable[int]) -> dict[int, int]:
    """The other direction of each TCP flow, -1 where the capture does not show it."""

    def key(flow: int, back: bool) -> tuple[bytes, int, bytes, int]:
        ends = (
            (flows.source[flow].tobytes(), int(flows.source_port[flow])),
            (flows.destination[flow].tobytes(), int(flows.destination_port[flow])),
        )
        one, other = ends[::-1] if back else ends
        return (*one, *other)

    of = {key(flow, back=False): flow for flow in np.flatnonzero(flows.protocol == TCP).tolist()}
    return {flow: of.get(key(flow, back=True), -1) for flow in wanted}
