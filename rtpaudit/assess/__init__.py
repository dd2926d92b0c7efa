"""Assess: streams and calls come in; their figures, rated and by window, go out."""

from collections.abc import Mapping, Sequence
from functools import partial

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.call import assess_call
from rtpaudit.assess.counted import counted_parts
from rtpaudit.assess.far_end import far_ends
from rtpaudit.assess.hearing import StreamSound
from rtpaudit.assess.listening import listen_to
from rtpaudit.assess.rating import Rated, budgets, buffer_curve, rate, rate_windows
from rtpaudit.assess.report_rows import far_end_rows, quality_rows
from rtpaudit.assess.reported import Reported
from rtpaudit.assess.results import AssessedCall, AssessedStream, Assessment, RecordingFacts, WindowColumns
from rtpaudit.assess.rows import SignallingRow, event_rows, signalling_row, tone_rows
from rtpaudit.assess.stream import Measured, measure, note_far_end
from rtpaudit.capture.frames import Damage, Octets
from rtpaudit.media.calls import Call
from rtpaudit.media.events import telephone_events
from rtpaudit.media.streams import Stream
from rtpaudit.profile import Profile
from rtpaudit.signalling.calls import SignallingMessage
from rtpaudit.signalling.quality_reports import QualityReport


def assess(
    streams: Sequence[Stream],
    calls: Sequence[Call],
    profile: Profile,
    buffers: Sequence[Sequence[Octets]] = (),
    messages: Sequence[SignallingMessage] = (),
    reported: Mapping[int, Reported] | None = None,
    quality_reports: Sequence[QualityReport] = (),
    recordings: Sequence[RecordingFacts] = (),
    captures: Sequence[str] = (),
    damage: Sequence[Damage] = (),
    digits: bool = False,
    sound: bool = True,
) -> Assessment:
    """Measure and rate every stream, then every call.

    ``streams`` come in the order in which they are numbered, and so do ``calls``, which refer to them. ``buffers`` are
    the octets of each recording, ``messages`` what was said in all of them. Without ``digits`` nothing of what is
    handed on tells which keys were pressed. Without ``sound`` no payload is looked at.
    """
    measured = [measure(stream, profile) for stream in streams]
    for one, far in zip(measured, far_ends(measured, calls, reported or {}), strict=True):
        note_far_end(one, far)
    pairs = listen_to(measured, calls, buffers, profile) if sound else {}
    rated = rate(streams, [one.path(profile) for one in measured], profile)
    _note_ratings(measured, rated)
    windows = _windows(measured, rated, profile)
    steps = budgets(
        rated,
        [one.lost_to_the_ear for one in measured],
        [len(one.playback.discarded) if one.playback else 0 for one in measured],
    )
    assessed = [
        AssessedStream(
            id=one.stream.id,
            call="",
            stream=one.stream,
            started_ns=one.started_ns,
            ended_ns=one.ended_ns,
            figures=one.figures,
            gaps=one.gaps,
            windows=windows[k],
            budget=steps[k],
            playback=one.playback,
            far_end=one.far_end,
            sound=one.sound,
            signs=one.signs,
            work_out_curve=partial(buffer_curve, one.playback, rated, k, profile) if one.playback else None,
        )
        for k, one in enumerate(measured)
    ]
    by_stream = {id(one.stream): one for one in assessed}
    counted = counted_parts(calls, measured, rated, profile)
    found = [
        assess_call(
            call,
            [by_stream[id(stream)] for stream in call.from_caller],
            [by_stream[id(stream)] for stream in call.from_callee],
            counted,
            pairs.get(id(call)),
        )
        for call in calls
    ]
    rows = [row for one in assessed for row in far_end_rows(one)] + quality_rows(quality_reports, assessed)
    return Assessment(
        recordings=list(recordings),
        reports=rows,
        reported=reported or {},
        captures=list(captures),
        streams=assessed,
        calls=found,
        damage=[*damage, *_cut_payloads(streams, buffers)],
        messages=_messages(messages, found),
        events=[
            row
            for one in assessed
            for row in (
                *event_rows(one.call, one.id, telephone_events(one.stream, buffers[one.stream.recording]), digits),
                *tone_rows(one, digits),
            )
        ],
    )


def _cut_payloads(streams: Sequence[Stream], buffers: Sequence[Sequence[Octets]]) -> list[Damage]:
    """What a snap length cut out of payloads, one row for each recording: the figures are whole, the sound is not.

    A payload that the end of the file cuts is told where the file is read.
    """
    counts: dict[str, tuple[int, int, int]] = {}
    for stream in streams:
        packets = stream.packets
        if (packets.captured == packets.length).all():
            continue
        ends = np.array([len(octets) for octets in buffers[stream.recording]])
        inside = packets.start + packets.captured < ends[packets.buffer]
        cut = np.flatnonzero((packets.captured < packets.length) & inside)
        if len(cut):
            first, number, missing = counts.get(stream.capture, (int(packets.start[cut[0]]), 0, 0))
            octets = int((packets.length[cut] - packets.captured[cut]).sum())
            counts[stream.capture] = (min(first, int(packets.start[cut[0]])), number + len(cut), missing + octets)
    return [
        Damage(
            capture,
            first,
            f"{number} RTP payloads cut short by the capture's snap length",
            f"{missing} octets of sound; the sound is incomplete, the figures are not",
        )
        for capture, (first, number, missing) in counts.items()
    ]


def _messages(messages: Sequence[SignallingMessage], calls: Sequence[AssessedCall]) -> list[SignallingRow]:
    """All messages with the id of their call, by time."""
    of = {id(message): call.id for call in calls if call.signalled for message in call.signalled.messages}
    rows = [signalling_row(message, of.get(id(message), "")) for message in messages]
    return sorted(rows, key=lambda row: row.time_ns)


def _note_ratings(measured: Sequence[Measured], rated: Rated) -> None:
    for k, one in enumerate(measured):
        figures = one.figures
        figures.one_way_delay_ms = float(rated.delay_ms[k])
        figures.delay_basis = rated.delay_basis[k]
        figures.ie_eff = float(rated.parts.Ie_eff[k])
        figures.r_factor = float(rated.parts.R[k])
        figures.mos_cqe = float(rated.mos[k])
        figures.r_factor_low = float(rated.low[k])
        figures.r_factor_high = float(rated.high[k])
        figures.rating_note = rated.notes[k]
        figures.quality_band = rated.bands[k]


def _windows(measured: Sequence[Measured], rated: Rated, profile: Profile) -> list[WindowColumns]:
    """The windows of every stream, all rated in one go."""
    found = [one.network.windows for one in measured]
    counts = np.array([len(one.from_s) for one in found], np.int64)
    missed = [
        one.network.windows.packets_lost + (one.playback.missed_per_window if one.playback else 0) for one in measured
    ]
    expected = np.concatenate([np.empty(0), *(one.packets_expected for one in found)])
    with np.errstate(invalid="ignore"):
        loss = 100.0 * np.concatenate([np.empty(0), *missed]) / expected
    R = rate_windows(loss, np.repeat(np.arange(len(found)), counts), rated, profile)
    edges = np.concatenate([[0], np.cumsum(counts)])
    return [
        WindowColumns(
            from_s=one.from_s,
            packets_expected=one.packets_expected,
            packets_lost=one.packets_lost,
            packets_discarded=playback.discarded_per_window if (playback := measured[k].playback) else None,
            loss_pct=one.loss_pct,
            jitter_ms=one.jitter_ms,
            pdv_p95_ms=one.pdv_p95_ms,
            r_factor=R[edges[k] : edges[k + 1]],
            activity_pct=_fitted(measured[k].sound, "activity_pct", len(one.from_s)),
            level_dbov=_fitted(measured[k].sound, "level_dbov", len(one.from_s)),
        )
        for k, one in enumerate(found)
    ]


def _fitted(sound: StreamSound | None, name: str, windows: int) -> NDArray[np.float64]:
    """A figure of the sound by window, NaN where the timeline has ended or was not looked at."""
    fitted = np.full(windows, np.nan)
    if sound is not None:
        found = getattr(sound.windows, name)[:windows]
        fitted[: len(found)] = found
    return fitted
