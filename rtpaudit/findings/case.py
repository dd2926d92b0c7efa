"""One call as the rules see it: its directions, its times, and the rest of the audit around it."""

from collections.abc import Iterable, Sequence
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.results import AssessedCall, AssessedStream, Assessment
from rtpaudit.assess.rows import EventRow
from rtpaudit.decode.icmp import IcmpError
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.profile import Profile
from rtpaudit.units import NS_PER_S


class Crowd:
    """Audio streams as columns, so that each of thousands can be held against all others."""

    def __init__(self, streams: Sequence[StreamFacts]) -> None:
        self._streams = streams
        hosts: dict[str, int] = {}
        ends = [[hosts.setdefault(host, len(hosts)) for host in _ends(one)] for one in streams]
        self._hosts = hosts
        self._ends = np.array(ends, np.int64).reshape(-1, 2)
        self._recording = np.array([one.stream.recording for one in streams], np.int64)
        self._began_ns = np.array([one.assessed.started_ns for one in streams], np.int64)
        self._ended_ns = np.array([one.assessed.ended_ns for one in streams], np.int64)
        self._loses = np.array([one.assessed.figures.packets_lost > 0 for one in streams], np.bool_)

    def strangers(self, facts: StreamFacts) -> tuple[int, list[StreamFacts]]:
        """How many streams of the same recording run beside one between other hosts, and those that miss packets."""
        source, destination = (self._hosts[host] for host in _ends(facts))
        beside = self._recording == facts.stream.recording
        beside &= (self._began_ns < facts.assessed.ended_ns) & (facts.assessed.started_ns < self._ended_ns)
        for column in self._ends.T:
            beside &= (column != source) & (column != destination)
        return int(beside.sum()), [self._streams[k] for k in np.flatnonzero(beside & self._loses).tolist()]


def _ends(facts: StreamFacts) -> tuple[str, str]:
    return facts.stream.source, facts.stream.destination


class Whole:
    """The audit, and the facts of each of its streams, worked out once whoever asks."""

    def __init__(self, assessment: Assessment, profile: Profile) -> None:
        self.assessment = assessment
        self.profile = profile
        self._facts: dict[str, StreamFacts] = {}

    def facts(self, one: AssessedStream) -> StreamFacts:
        """Facts of a stream."""
        if one.id not in self._facts:
            self._facts[one.id] = StreamFacts(one, self.profile)
        return self._facts[one.id]

    def frames_dropped(self, facts: StreamFacts) -> int:
        """Frames that the capture host says it dropped in the recording of a stream."""
        recordings = self.assessment.recordings
        if facts.stream.recording >= len(recordings):
            return 0
        return sum(one.dropped or 0 for one in recordings[facts.stream.recording].interfaces)

    def unreachable(self, case: "Case") -> tuple[IcmpError, ...]:
        """ICMP errors of the recording of a call."""
        recordings = self.assessment.recordings
        return tuple(error for number in case.recordings for error in recordings[number].unreachable)

    def last_ns(self, case: "Case") -> int:
        """Last sign of life of anything in the recording of a call."""
        recordings = self.assessment.recordings
        known = [recordings[number].last_ns for number in case.recordings if number < len(recordings)]
        return max([case.call.ended_ns, *(one.assessed.ended_ns for one in case.streams), *known])

    def events_of(self, facts: StreamFacts) -> list[EventRow]:
        """Telephone events that a stream carried."""
        return self._events.get(facts.id, [])

    @cached_property
    def _events(self) -> dict[str, list[EventRow]]:
        found: dict[str, list[EventRow]] = {}
        for row in self.assessment.events:
            if row.carried_as == "event":
                found.setdefault(row.stream, []).append(row)
        return found

    @cached_property
    def audio(self) -> list[StreamFacts]:
        """All audio streams."""
        return [self.facts(one) for one in self.assessment.streams if one.stream.media == "audio"]

    @cached_property
    def ssrcs(self) -> frozenset[int]:
        """Of all audio streams, also of those that the audit was not narrowed to."""
        own = frozenset(one.stream.ssrc for one in self.audio)
        return own.union(*(one.ssrcs for one in self.assessment.recordings))

    @cached_property
    def by_source(self) -> dict[tuple[int, str], list[StreamFacts]]:
        """Audio streams by recording and sending host."""
        found: dict[tuple[int, str], list[StreamFacts]] = {}
        for one in self.audio:
            found.setdefault((one.stream.recording, one.stream.source), []).append(one)
        return found

    @cached_property
    def crowd(self) -> Crowd:
        """The audio streams as columns."""
        return Crowd(self.audio)


class Case:
    """One call."""

    def __init__(self, call: AssessedCall, whole: Whole) -> None:
        self.call = call
        self.whole = whole
        self.profile = whole.profile
        self.from_caller = [whole.facts(one) for one in call.from_caller]
        self.from_callee = [whole.facts(one) for one in call.from_callee]
        self._left: dict[str, NDArray[np.float64]] = {}

    def left(self, facts: StreamFacts) -> NDArray[np.float64]:
        """How much of each gone packet no cause of a lower tier explains. [0 to 1] Shape (items,)"""
        return self._left.setdefault(facts.id, np.ones(len(facts.gone)))

    def leave(self, facts: StreamFacts, left: NDArray[np.float64]) -> None:
        """Note what a tier left."""
        self._left[facts.id] = left

    @cached_property
    def streams(self) -> list[StreamFacts]:
        """Both directions, in id order."""
        return sorted(self.from_caller + self.from_callee, key=lambda one: int(one.id[1:]))

    @property
    def directions(self) -> list[list[StreamFacts]]:
        """From the caller, from the callee."""
        return [self.from_caller, self.from_callee]

    def talker(self, facts: StreamFacts) -> str:
        """Who says what is in a stream."""
        return "caller" if facts in self.from_caller else "callee"

    def listener(self, facts: StreamFacts) -> str:
        """Who hears it."""
        return "callee" if facts in self.from_caller else "caller"

    def seconds(self, time_ns: int) -> float:
        """A time of the capture within the call. [s]"""
        return (time_ns - self.call.started_ns) / NS_PER_S

    @property
    def recordings(self) -> set[int]:
        """Numbers of the recordings that the call's streams come from, or those of its capture without any."""
        found = {one.stream.recording for one in self.streams}
        known = enumerate(self.whole.assessment.recordings)
        return found or {number for number, one in known if one.name == self.call.capture}

    @property
    def heard_until_ns(self) -> int:
        """Until when somebody may have listened: the release, else the last sign of the call."""
        said = self.call.signalled
        released = said.released_ns if said is not None else None
        return self.call.ended_ns if released is None else released

    def renegotiated_near(self, time_ns: int) -> bool:
        """Whether the signalling announced a change of media within two seconds before or one after."""
        said = self.call.signalled
        return said is not None and any(-NS_PER_S <= time_ns - term.from_ns <= 2 * NS_PER_S for term in said.media)

    def others_of(self, facts: StreamFacts) -> list[StreamFacts]:
        """Streams of the other direction."""
        return self.from_callee if facts in self.from_caller else self.from_caller

    def elsewhere_from(self, facts: StreamFacts) -> list[StreamFacts]:
        """Audio streams of other calls that the sender of a stream sent in the same recording."""
        own = {one.id for one in self.streams}
        sent = self.whole.by_source.get((facts.stream.recording, facts.stream.source), [])
        return [one for one in sent if one.id not in own]

    def elsewhere(self) -> Iterable[StreamFacts]:
        """Audio streams of other calls in the same recording."""
        own = {one.id for one in self.streams}
        recordings = {one.stream.recording for one in self.streams}
        return [one for one in self.whole.audio if one.id not in own and one.stream.recording in recordings]
