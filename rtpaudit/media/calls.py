"""Streams that belong to each other become calls, where no signalling tells."""

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from rtpaudit.media.streams import Stream
from rtpaudit.signalling.calls import MediaTerm, SipCall

FOLLOWS_WITHIN_NS = 10_000_000_000
"""Streams on one pair of addresses that follow each other within 10 s belong to one call."""


@dataclass(slots=True)
class Call:
    """One call leg as the media shows it."""

    recording: int
    capture: str
    caller: str
    callee: str
    started_ns: int
    ended_ns: int
    from_caller: list[Stream] = field(default_factory=list)
    from_callee: list[Stream] = field(default_factory=list)
    signalled: SipCall | None = None
    """what the endpoints said of it"""
    unseen: list[MediaTerm] = field(default_factory=list)
    """audio that a side asked for and that never came"""
    id: str = ""
    conversation: str = ""
    """id that its legs share"""
    near: str = ""
    """side at which the capture was taken, ``unknown`` where the user's word tells neither, "" without such a word"""

    @property
    def streams(self) -> list[Stream]:
        """Both directions."""
        return self.from_caller + self.from_callee


def pair_streams(streams: Sequence[Stream]) -> list[Call]:
    """Calls of audio streams by their addresses and times, by first packet.

    The caller is the source of the first packet. Streams between the same two address-and-port pairs, either way, that
    overlap or follow within 10 s are one call; a stream alone is one too. Video makes no call. Sets ``match_basis``.
    """
    between: dict[tuple[object, ...], list[Stream]] = defaultdict(list)
    for stream in streams:
        if stream.media == "audio":
            between[_pair(stream)].append(stream)
    calls = [call for mates in between.values() for call in _chained(mates)]
    return sorted(calls, key=lambda call: call.started_ns)


def _pair(stream: Stream) -> tuple[object, ...]:
    ends = sorted([(stream.source, stream.source_port), (stream.destination, stream.destination_port)])
    return (stream.recording, *ends)


def _chained(streams: Iterable[Stream]) -> Iterable[Call]:
    call: Call | None = None
    for stream in sorted(streams, key=lambda one: int(one.packets.time_ns[0])):
        started, ended = int(stream.packets.time_ns[0]), int(stream.packets.time_ns[-1])
        if call is None or started > call.ended_ns + FOLLOWS_WITHIN_NS:
            if call is not None:
                yield call
            call = Call(stream.recording, stream.capture, stream.source, stream.destination, started, ended)
        first = call.streams[0] if call.streams else stream
        forward = (stream.source, stream.source_port) == (first.source, first.source_port)
        if first is not stream:
            stream.match_basis = "time" if forward else "mirror"
        if not forward and first.match_basis == "":
            first.match_basis = "mirror"
        (call.from_caller if forward else call.from_callee).append(stream)
        call.ended_ns = max(call.ended_ns, ended)
    if call is not None:
        yield call
