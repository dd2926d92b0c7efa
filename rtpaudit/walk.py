"""The walk: captures come in at one end, an ``Audit`` goes out at the other, room after room."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import tzinfo
from functools import cached_property
from itertools import islice
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess import assess
from rtpaudit.assess.reported import Reported
from rtpaudit.assess.results import Assessment, RecordingFacts
from rtpaudit.assess.sound import SoundSource
from rtpaudit.capture import open_recordings
from rtpaudit.capture.frames import Damage, Octets
from rtpaudit.decode import Decoder, Flows
from rtpaudit.decode.icmp import MOST_ERRORS, IcmpError, quoted
from rtpaudit.errors import UnusableArguments
from rtpaudit.findings import diagnose
from rtpaudit.findings.rule import Finding
from rtpaudit.media.agreed import Agreed
from rtpaudit.media.calls import Call
from rtpaudit.media.find import find_streams
from rtpaudit.media.join import join
from rtpaudit.media.naming import name_all, streams_of
from rtpaudit.media.near import note_near_ends
from rtpaudit.media.rtp import RtpCollector
from rtpaudit.media.selection import Selection, chosen
from rtpaudit.media.streams import Stream
from rtpaudit.profile import Profile
from rtpaudit.signalling.calls import SignallingMessage
from rtpaudit.signalling.collector import Signalling, SignallingCollector
from rtpaudit.signalling.payload_types import Encoding
from rtpaudit.signalling.quality_reports import QualityReport
from rtpaudit.signalling.reports import RtcpCollector

if TYPE_CHECKING:
    from pandas import DataFrame

    from rtpaudit.capture import Recording
    from rtpaudit.report.wav import AudioSource

Progress = Callable[[int, int], None]
"""Called with the octets read so far and those there are to read."""


@dataclass(slots=True)
class Heard:
    """What one recording brought."""

    recording: "Recording"
    flows: Flows
    streams: list[Stream]
    calls: list[Call]
    signalling: Signalling
    reported: Reported
    facts: RecordingFacts
    buffers: list[Octets]
    damage: list[Damage]

    @property
    def messages(self) -> list[SignallingMessage]:
        """What was said, by time."""
        return self.signalling.messages

    @property
    def quality_reports(self) -> list[QualityReport]:
        """Reports in SIP bodies."""
        return self.signalling.reports


class Audit:
    """All that is known of one or several captures, as tables and as sound."""

    def __init__(
        self,
        assessment: Assessment,
        sound: SoundSource,
        profile: Profile,
        legs: Sequence[Call] = (),
        heard: Sequence[Heard] = (),
        diagnosis: Sequence[Finding] = (),
    ) -> None:
        self.assessment = assessment
        self.profile = profile
        self.sound: AudioSource = sound
        self._legs = legs
        self._heard = heard
        self.diagnosis = diagnosis

    @cached_property
    def tables(self) -> Mapping[str, "DataFrame"]:
        """Every table by name."""
        from rtpaudit.report.tables import build_tables

        found = self.assessment
        return build_tables(found, self.diagnosis, found.messages, found.events, found.reports)

    def __getattr__(self, name: str) -> Any:
        # Tables are attributes: audit.calls, audit.streams and so on, by the list of columns.py.
        from rtpaudit.columns import TABLES

        if name in TABLES:
            return self.tables[name]
        raise AttributeError(f"an audit has no {name!r}; its tables are {', '.join(TABLES)}")

    def samples(self, stream: str, heard: bool = False) -> NDArray[np.int16]:
        """What the payloads of a stream say, on its RTP timeline, or what was heard after playout and concealment.

        Raises
        ------
        MissingCodec
            If the encoding has no decoder, or the payload is encrypted.
        UnusableArguments
            If there is no such stream.
        """
        if stream not in {one.id for one in self.assessment.streams}:
            raise UnusableArguments(f"there is no stream {stream!r}")
        return (self.sound.heard(stream) if heard else self.sound.sent(stream))[0].copy()

    def write(
        self,
        folder: str | Path,
        *,
        audio: bool = True,
        private: bool = False,
        single_file: bool = False,
        zone: tzinfo | None = None,
    ) -> None:
        """Write the report folder; UnusableOutput where it cannot be, or is not ours to replace."""
        from rtpaudit.report.folder import write_folder

        write_folder(self, Path(folder), audio=audio, private=private, single_file=single_file, zone=zone)

    def excerpt(self, path: str | Path) -> list[Path]:
        """Write the packets of these calls, all legs of each conversation, as pcapng; the files that were written.

        Calls of several recordings make a file each. UnusableOutput where one cannot be written, or is not ours to
        replace.
        """
        from rtpaudit.report.excerpt import write_excerpt

        return write_excerpt(Path(path), self._legs, self._heard)


def audit(
    *paths: str | Path,
    profile: Profile | None = None,
    payload_types: Mapping[int, Encoding] | None = None,
    delay_ms: float | None = None,
    select: Selection | None = None,
    near: str | None = None,
    digits: bool = False,
    sound: bool = True,
    findings: bool = True,
    progress: Progress | None = None,
) -> Audit:
    """Audit one capture or several.

    Parameters
    ----------
    *paths : str or Path
        Captures; "-" is standard input. Files given together that continue each other are one recording.
    profile : Profile, optional
        Playout, planning values and limits; the defaults where left out.
    payload_types : mapping, optional
        Encoding by payload type, where no signalling tells.
    delay_ms : float, optional
        Known one-way delay of the network. [ms]
    select : Selection, optional
        Which calls to measure; the others are not, and ids are those of the whole audit.
    near : str, optional
        Address, or prefix, at which the capture was taken.
    digits : bool
        Whether to tell which keys were pressed; they are masked otherwise, as they may be a card number.
    sound : bool
        Whether to decode and measure the sound. Without it the figures of the packets come many times faster.
    findings : bool
        Whether to look for causes. Without sound and findings what is left is the figures of the packets.
    progress : callable, optional
        Told how far reading has come.

    Raises
    ------
    UnreadableCapture
        If nothing at all can be read.
    NothingChosen
        If no call is what was selected.
    UnusableArguments
        If no call has an end at the address that is said to be near.
    """
    if not paths:
        raise UnusableArguments("no capture was given")
    settings = profile or Profile()
    if delay_ms is not None:
        settings = replace(settings, network=replace(settings.network, delay_ms=delay_ms))
    recordings = open_recordings(paths)
    total = sum(len(file.octets) for recording in recordings for file in recording.files)
    heard: list[Heard] = []
    for number, recording in enumerate(recordings):
        done = sum(len(file.octets) for earlier in recordings[:number] for file in earlier.files)
        heard.append(_listen_to(recording, number, payload_types or {}, _from(progress, done, total)))
    streams = [stream for one in heard for stream in one.streams]
    calls = [call for one in heard for call in one.calls]
    messages = [message for one in heard for message in one.signalling.messages]
    name_all(streams, calls)
    calls_in_all, legs = len(calls), calls
    if select:
        calls = chosen(calls, select)
        meant = {call.conversation for call in calls}
        legs = [call for call in legs if call.conversation in meant]
        streams = streams_of(calls, streams)
        messages = [message for call in calls if call.signalled for message in call.signalled.messages]
    if near is not None:
        note_near_ends(calls, near)
    buffers = [one.buffers for one in heard]
    assessment = assess(
        streams,
        calls,
        settings,
        buffers=buffers,
        messages=messages,
        reported={number: one.reported for number, one in enumerate(heard)},
        quality_reports=[report for one in heard for report in one.signalling.reports],
        recordings=[one.facts for one in heard],
        captures=[file.name for recording in recordings for file in recording.files],
        damage=[row for one in heard for row in one.damage],
        digits=digits,
        sound=sound,
    )
    assessment.calls_in_all = calls_in_all
    source = SoundSource(buffers, assessment.streams, settings.conceals_loss)
    return Audit(assessment, source, settings, legs, heard, diagnose(assessment, settings) if findings else ())


def _from(progress: Progress | None, done: int, total: int) -> Callable[[int], None]:
    def tell(octets: int) -> None:
        if progress:
            progress(done + octets, total)

    return tell


def _listen_to(
    recording: "Recording", number: int, given: Mapping[int, Encoding], progress: Callable[[int], None]
) -> Heard:
    """Walk one recording from its frames to its streams."""
    decoder, collector, signalling, control = Decoder(), RtpCollector(), SignallingCollector(), RtcpCollector()
    errors: list[IcmpError] = []
    buffers: list[Octets] = []

    def take(batches: Sequence[Any], octets: Octets | None, name: str) -> None:
        for packets in batches:
            if packets.octets is not octets:
                # Datagrams put together from fragments lie in a buffer of their own.
                buffers.append(packets.octets)
                collector.add(packets, len(buffers) - 1)
            else:
                collector.add(packets, here)
            signalling.add(packets, decoder.flows, name)
            control.add(packets, decoder.flows, name)
            errors.extend(islice(quoted(packets), MOST_ERRORS - len(errors)))

    passed = 0
    for file in recording.files:
        here = len(buffers)
        buffers.append(file.octets)
        for frames in file.batches():
            take(decoder.decode(frames, file.name), file.octets, file.name)
            progress(passed + (int(frames.start[-1]) if len(frames) else 0))
        passed += len(file.octets)
        progress(passed)
    take(decoder.finish(), None, recording.name)
    said = signalling.finish()
    agreed = Agreed(said.calls, said.descriptions)
    streams = find_streams(
        collector,
        decoder.flows,
        buffers,
        recording=number,
        capture=recording.name,
        given=given,
        offered=agreed.offered(decoder.flows),
        dialog_of=agreed.dialog_of(decoder.flows),
    )
    reports = control.finish()
    facts = RecordingFacts(
        name=recording.name,
        interfaces=tuple(one for file in recording.files for one in file.interfaces),
        unreachable=tuple(errors),
        skipped=dict(decoder.skipped),
        ssrcs=frozenset(stream.ssrc for stream in streams if stream.media == "audio"),
        last_ns=max(
            [
                *(int(stream.packets.time_ns.max()) for stream in streams),
                *(message.time_ns for message in said.messages),
                *(call.ended_ns for call in said.calls),
            ],
            default=0,
        ),
    )
    return Heard(
        recording=recording,
        flows=decoder.flows,
        streams=streams,
        calls=join(streams, said.calls, agreed, recording.name),
        signalling=said,
        reported=Reported(reports.datagrams),
        facts=facts,
        buffers=buffers,
        damage=[*recording.damage, *decoder.damage, *said.damage, *reports.damage],
    )
