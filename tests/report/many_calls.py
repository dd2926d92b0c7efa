"""An audit of as many calls as a test wants: those of the demo over and over, under new ids, a minute later each."""

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

from rtpaudit.assess.results import AssessedCall, AssessedStream, Assessment
from rtpaudit.report.tables import build_tables
from rtpaudit.report.wav import Sound
from rtpaudit.walk import Audit, audit

DEMO = Path(__file__).parents[2] / "rtpaudit" / "demo" / "demo.pcap"
MINUTE_NS = 60_000_000_000


class Repeated:
    """What a walk would hand to the report."""

    def __init__(self, once: Audit, calls: int) -> None:
        self.original: dict[str, str] = {}
        self.profile = once.profile
        self._sound = once.sound
        repeated = list(self._calls(once.assessment, calls))
        self.assessment = Assessment(
            captures=list(once.assessment.captures),
            streams=[stream for call in repeated for stream in call.streams],
            calls=repeated,
        )
        self.tables = build_tables(self.assessment)
        self.sound = self

    def _calls(self, found: Assessment, calls: int) -> Iterator[AssessedCall]:
        templates = [call for call in found.calls if call.streams]
        for number in range(calls):
            call = templates[number % len(templates)]
            later_ns = number * MINUTE_NS
            name = f"c{number + 1:02d}"
            yield replace(
                call,
                id=name,
                conversation=f"v{number + 1:02d}",
                caller=f"0163296{number:04d}",
                started_ns=call.started_ns + later_ns,
                answered_ns=None if call.answered_ns is None else call.answered_ns + later_ns,
                ended_ns=call.ended_ns + later_ns,
                from_caller=[self._stream(one, name, later_ns) for one in call.from_caller],
                from_callee=[self._stream(one, name, later_ns) for one in call.from_callee],
                signalled=None,
            )

    def _stream(self, one: AssessedStream, call: str, later_ns: int) -> AssessedStream:
        name = f"s{len(self.original) + 1:02d}"
        self.original[name] = one.id
        packets = replace(one.stream.packets, time_ns=one.stream.packets.time_ns + later_ns)
        playback = one.playback
        if playback is not None:
            playback = replace(
                playback, played=replace(playback.played, playout_ns=playback.played.playout_ns + later_ns)
            )
        return replace(
            one,
            id=name,
            call=call,
            stream=replace(one.stream, packets=packets),
            started_ns=one.started_ns + later_ns,
            ended_ns=one.ended_ns + later_ns,
            gaps=replace(one.gaps, at_ns=one.gaps.at_ns + later_ns),
            playback=playback,
        )

    def why_silent(self, stream_id: str) -> str:
        return self._sound.why_silent(self.original[stream_id])

    def sent(self, stream_id: str) -> Sound:
        return self._sound.sent(self.original[stream_id])

    def heard(self, stream_id: str) -> Sound:
        return self._sound.heard(self.original[stream_id])

    def both(self, call: AssessedCall) -> Sound:
        raise AssertionError(f"nobody asked for the sound of {call.id}")

    def origin_ns(self, stream_id: str) -> int:
        one = next(one for one in self.assessment.streams if one.id == stream_id)
        return one.started_ns


def many_calls(calls: int) -> Repeated:
    """The calls of the demo, so many of them."""
    return Repeated(audit(DEMO), calls)
