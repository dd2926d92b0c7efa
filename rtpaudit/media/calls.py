"""Streams that belong to each other become calls, where no signalling tells."""

from collections import defaultdict, deque
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from rtpaudit.media.numbering import MAX_DROPOUT, MAX_MISORDER
from rtpaudit.media.streams import Stream
from rtpaudit.signalling.calls import MediaTerm, SipCall

FOLLOWS_WITHIN_NS = 10_000_000_000
"""Streams on one pair of addresses that follow each other within 10 s belong to one call."""

MOVING_NS = 1_000_000_000
"""A source that moves to another port may send to both for so long."""
RECENT = 8
"""streams of one SSRC that a new one is compared with"""
MOST_PAIRS = 4096
"""pairs of one-way calls between two hosts up to which any two are compared"""


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
    overlap or follow within 10 s are one call; a stream alone is one too. So are a stream and the one that goes on with
    its SSRC and numbers at another port, and two ways between two hosts on ports that do not mirror each other, where
    no third could be meant. Video makes no call. Sets ``match_basis``.
    """
    between: dict[tuple[object, ...], list[Stream]] = defaultdict(list)
    for stream in streams:
        if stream.media == "audio":
            between[_pair(stream)].append(stream)
    calls = sorted((call for mates in between.values() for call in _chained(mates)), key=lambda call: call.started_ns)
    return _facing(_moved(calls))


def goes_on(before: Stream, after: Stream) -> bool:
    """Whether a source moved its stream: another port or host at one end, the same SSRC, and numbers that go on."""
    silence = int(after.packets.time_ns[0]) - int(before.packets.time_ns[-1])
    ahead = int(after.packets.sequence[0]) - int(before.packets.sequence[-1])
    return (
        (before.recording, before.ssrc) == (after.recording, after.ssrc)
        and (before.source == after.source or before.destination == after.destination)
        and -MOVING_NS <= silence <= FOLLOWS_WITHIN_NS
        and (ahead + MAX_MISORDER) & 0xFFFF < MAX_DROPOUT + MAX_MISORDER
    )


def _moved(calls: Sequence[Call]) -> list[Call]:
    """Calls by their begin, those put together whose streams went on elsewhere."""
    kept: list[Call] = []
    seen: dict[tuple[int, int], deque[tuple[Stream, Call]]] = defaultdict(lambda: deque(maxlen=RECENT))
    for call in calls:
        found = next(
            (
                (before, home, stream)
                for stream in call.streams
                for before, home in seen[stream.recording, stream.ssrc]
                if goes_on(before, stream)
            ),
            None,
        )
        home = call
        if found is None:
            kept.append(call)
        else:
            before, home, stream = found
            same_way = any(one is before for one in home.from_caller) == any(one is stream for one in call.from_caller)
            _take_over(home, call, same_way)
        for stream in call.streams:
            seen[stream.recording, stream.ssrc].append((stream, home))
    return kept


def _facing(calls: Sequence[Call]) -> list[Call]:
    """Calls by their begin, one-way ones put together that can only be the two ways of one conversation."""
    one_way: dict[tuple[int, str, str], list[Call]] = defaultdict(list)
    for call in calls:
        if not call.from_callee and call.caller != call.callee:
            one_way[call.recording, call.caller, call.callee].append(call)
    gone: set[int] = set()
    for (recording, caller, callee), there in one_way.items():
        back = one_way.get((recording, callee, caller), [])
        if caller > callee or not back or len(there) * len(back) > MOST_PAIRS:
            continue
        pairs = [(one, other) for one in there for other in back if _side_by_side(one, other)]
        for one, other in pairs:
            if sum(one is a or other is b for a, b in pairs) == 1:
                first, second = sorted((one, other), key=lambda call: call.started_ns)
                _take_over(first, second, same_way=False)
                gone.add(id(second))
    return [call for call in calls if id(call) not in gone]


def _side_by_side(one: Call, other: Call) -> bool:
    """Whether two calls last together for half the time of the shorter one."""
    together = min(one.ended_ns, other.ended_ns) - max(one.started_ns, other.started_ns)
    return 2 * together > min(one.ended_ns - one.started_ns, other.ended_ns - other.started_ns)


def _take_over(home: Call, call: Call, same_way: bool) -> None:
    """Make the streams of a later call those of another."""
    home.from_caller += call.from_caller if same_way else call.from_callee
    home.from_callee += call.from_callee if same_way else call.from_caller
    home.ended_ns = max(home.ended_ns, call.ended_ns)
    for stream in home.streams:
        stream.match_basis = stream.match_basis or "time"


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
