"""One call as the rules see it: its directions, its times, and the rest of the audit around it."""

from collections.abc import Iterable
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.results import AssessedCall, AssessedStream, Assessment
from rtpaudit.assess.rows import EventRow
from rtpaudit.decode.icmp import IcmpError
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.profile import Profile
from rtpaudit.units import NS_PER_S


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
        own = case.recordings
        times = [one.ended_ns for one in self.assessment.streams if one.stream.recording in own]
        times += [one.ended_ns for one in self.assessment.calls if one.capture == case.call.capture]
        times += [row.time_ns for row in self.assessment.messages if row.capture == case.call.capture]
        return max(times, default=case.call.ended_ns)

    def events_of(self, facts: StreamFacts) -> list[EventRow]:
        """Telephone events that a stream carried."""
        return [row for row in self.assessment.events if row.stream == facts.id and row.carried_as == "event"]

    @cached_property
    def audio(self) -> list[StreamFacts]:
        """All audio streams."""
        return [self.facts(one) for one in self.assessment.streams if one.stream.media == "audio"]


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

    @property
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

    def elsewhere(self) -> Iterable[StreamFacts]:
        """Audio streams of other calls in the same recording."""
        own = {one.id for one in self.streams}
        recordings = {one.stream.recording for one in self.streams}
        return [one for one in self.whole.audio if one.id not in own and one.stream.recording in recordings]
