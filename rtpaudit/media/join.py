"""Streams join the calls that were signalled; what nobody announced becomes calls of its own.

Trust falls from step to step, and ``match_basis`` says which it was: the address that a party announced, the mirror of
a stream that was announced, the time and the encoding.
"""

from collections import defaultdict, deque
from collections.abc import Sequence

from rtpaudit.media.agreed import Agreed, Agreement
from rtpaudit.media.calls import RECENT as RECENT_STREAMS
from rtpaudit.media.calls import Call, goes_on, pair_streams
from rtpaudit.media.selection import host_of
from rtpaudit.media.streams import Stream
from rtpaudit.signalling.calls import CALLEE, CALLER, MediaTerm, SipCall
from rtpaudit.signalling.conversations import conversations as conversations_of_dialogs
from rtpaudit.units import NS_PER_S

OTHER = {CALLER: CALLEE, CALLEE: CALLER}
Ends = tuple[str, int, str, int]


CLEARLY_NS = NS_PER_S
"""by how much a call has to be nearer in time than any other that a stream would fit"""
ENDS_WITH_NS = 2 * NS_PER_S
"""how far the last packet of a call is from its BYE"""
RECENT = 64
"""calls with the same evidence that a call is compared with, since a device may give all its streams one SSRC"""


def join(streams: Sequence[Stream], signalled: Sequence[SipCall], agreed: Agreed, capture: str = "") -> list[Call]:
    """Calls of one recording, signalled or not, by their begin. Sets ``match_basis`` of the streams."""
    recording = streams[0].recording if streams else 0
    calls = [
        Call(recording, capture, one.caller.user, one.callee.user, one.started_ns, one.ended_ns, signalled=one)
        for one in signalled
    ]
    table = _Joined(calls, agreed)
    left = [one for one in streams if not table.by_announcement(one)]
    left = [one for one in left if not table.by_mirror(one)]
    left = [one for one in left if not (table.by_mirror(one) or table.by_going_on(one) or table.by_time(one))]
    for call in calls:
        _close(call)
    return sorted([*calls, *pair_streams(left)], key=lambda call: call.started_ns)


class _Joined:
    """Signalled calls while streams come to them."""

    def __init__(self, calls: Sequence[Call], agreed: Agreed) -> None:
        self._agreed = agreed
        self._calls = {id(call.signalled): call for call in calls}
        self._by_ends: dict[Ends, list[tuple[Stream, Call, str]]] = defaultdict(list)
        self._by_ssrc: dict[int, deque[tuple[Stream, Call, str]]] = defaultdict(lambda: deque(maxlen=RECENT_STREAMS))
        self._by_host: dict[str, list[Call]] = defaultdict(list)
        for call in calls:
            said = call.signalled
            if said is None:
                continue
            for host in {term.address for term in said.media} | {host_of(said.caller), host_of(said.callee)}:
                self._by_host[host].append(call)

    def by_announcement(self, stream: Stream) -> bool:
        """Join a stream to the call whose party announced the address that it goes to."""
        found = self._agreed.at((stream.destination, stream.destination_port), *_span(stream))
        call = self._call_of(found)
        if found is None or call is None:
            return False
        stream.encrypted |= found.term.encrypted
        self._put(stream, call, OTHER[found.term.side], "announced")
        return True

    def by_mirror(self, stream: Stream) -> bool:
        """Join a stream that goes back where a joined one came from, or that comes from an announced address."""
        begin, end = _span(stream)
        back = (stream.destination, stream.destination_port, stream.source, stream.source_port)
        for mate, call, side in self._by_ends.get(back, ()):
            first, last = _span(mate)
            if min(end, last) > max(begin, first):
                self._put(stream, call, OTHER[side], "mirror")
                return True
        found = self._agreed.at((stream.source, stream.source_port), begin, end)
        call_there = self._call_of(found)
        if found is None or call_there is None:
            return False
        stream.encrypted |= found.term.encrypted
        self._put(stream, call_there, found.term.side, "mirror")
        return True

    def by_going_on(self, stream: Stream) -> bool:
        """Join a stream to the call of the one that it goes on with at another port or host."""
        for before, call, side in self._by_ssrc.get(stream.ssrc, ()):
            if goes_on(before, stream):
                self._put(stream, call, side, "time")
                return True
        return False

    def by_time(self, stream: Stream) -> bool:
        """Join a stream to the one call that lacks its direction, names its hosts, and agreed on its encoding.

        Where several do, to the one whose answer is much the nearest to its begin.
        """
        fitting: list[tuple[int, Call, str]] = []
        begin, end = _span(stream)
        hosts = {id(one): one for host in (stream.source, stream.destination) for one in self._by_host.get(host, ())}
        for call in hosts.values():
            said = call.signalled
            if said is None or not _lasts(call, said, begin, end):
                continue
            for side, mates in ((CALLER, call.from_caller), (CALLEE, call.from_callee)):
                if not mates and _fits(stream, side, said):
                    fitting.append((abs(begin - (said.answered_ns or said.started_ns)), call, side))
        fitting.sort(key=lambda one: one[0])
        clear = len(fitting) == 1 or (len(fitting) > 1 and fitting[1][0] - fitting[0][0] > CLEARLY_NS + fitting[0][0])
        if not clear or stream.media != "audio":
            return False
        self._put(stream, *fitting[0][1:], "time")
        return True

    def _call_of(self, found: Agreement | None) -> Call | None:
        if found is None or found.call is None or found.term.side not in OTHER:
            return None
        return self._calls.get(id(found.call))

    def _put(self, stream: Stream, call: Call, from_side: str, basis: str) -> None:
        """Video is known to belong to the call, and no more: it makes no figures."""
        ends = (stream.source, stream.source_port, stream.destination, stream.destination_port)
        self._by_ends[ends].append((stream, call, from_side))
        self._by_ssrc[stream.ssrc].append((stream, call, from_side))
        stream.match_basis = basis
        if stream.media == "audio":
            (call.from_caller if from_side == CALLER else call.from_callee).append(stream)


def _span(stream: Stream) -> tuple[int, int]:
    return int(stream.packets.time_ns[0]), int(stream.packets.time_ns[-1]) + 1


def _lasts(call: Call, said: SipCall, begin: int, end: int) -> bool:
    """Whether media of a time may be that of a call; where only its end was captured, media has to end with it."""
    if said.began_before and not said.media:
        return abs(end - call.ended_ns) <= ENDS_WITH_NS
    return min(end, call.ended_ns) > (begin if said.began_before else max(begin, call.started_ns))


def _fits(stream: Stream, from_side: str, said: SipCall) -> bool:
    """Whether a stream may come from one side of a call.

    Either its own host is the source or the other's the target, by what they announced; or media goes between the two
    hosts that signal, as it does where an address translator stands before those that announced private addresses.
    """
    ends = (host_of(said.caller), host_of(said.callee))
    between = (stream.source, stream.destination) == (ends if from_side == CALLER else ends[::-1])
    terms = [term for term in said.media if term.kind == "audio"]
    if not terms:
        return between and said.began_before
    coded = stream.encoding == "unknown" or any(
        one.name == stream.encoding for term in terms for one in term.encodings.values()
    )
    return coded and (
        between
        or any(term.address == (stream.source if term.side == from_side else stream.destination) for term in terms)
    )


def _close(call: Call) -> None:
    """A call whose BYE the capture does not show ends with its last packet; likewise, it begins with its first."""
    signalled = call.signalled
    if signalled is None:
        return
    last = [int(one.packets.time_ns[-1]) for one in call.streams]
    if signalled.began_before:
        call.started_ns = min([signalled.started_ns, *(int(one.packets.time_ns[0]) for one in call.streams)])
    call.ended_ns = signalled.ended_ns if signalled.released_ns is not None else max([signalled.ended_ns, *last])
    call.unseen = [term for term in signalled.media if _unseen(term, call)]


def _unseen(term: MediaTerm, call: Call) -> bool:
    """Whether a side waited for audio at a term, and none came from the other."""
    coming = call.from_caller if term.side == CALLEE else call.from_callee
    return term.kind == "audio" and term.port > 0 and term.receives and not coming


def conversations(calls: Sequence[Call]) -> list[int]:
    """Number of the conversation of each call; calls whose media, parties or session say so are legs of one.

    Evidence is what the signalling room finds (Session-ID of RFC 7989, same parties at the same time), a Call-ID in
    common, or one SSRC that both carry at the same time.
    """
    signalled = [call.signalled for call in calls if call.signalled is not None]
    said = dict(zip(map(id, signalled), conversations_of_dialogs(signalled), strict=True))
    number = list(range(len(calls)))

    def root(k: int) -> int:
        while number[k] != k:
            k = number[k]
        return k

    seen: dict[object, list[int]] = defaultdict(list)
    for k, call in enumerate(calls):
        for evidence in _evidence(call) | {("said", said[id(one)]) for one in (call.signalled,) if one is not None}:
            for other in seen[evidence][-RECENT:]:
                if _together(calls[other], call):
                    number[max(root(k), root(other))] = min(root(k), root(other))
            seen[evidence].append(k)
    order: dict[int, int] = {}
    return [order.setdefault(root(k), len(order)) for k in range(len(calls))]


def _evidence(call: Call) -> set[object]:
    found: set[object] = {("ssrc", stream.ssrc, stream.encoding) for stream in call.streams if stream.ssrc}
    if call.signalled is not None:
        found.add(("call", call.signalled.call_id))
    return found


def _together(one: Call, other: Call) -> bool:
    return min(one.ended_ns, other.ended_ns) > max(one.started_ns, other.started_ns)
