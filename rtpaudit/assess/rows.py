"""Rows of the signalling, events and reports tables, each with an attribute for every column."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from rtpaudit.audio.digits import Digit
from rtpaudit.audio.level import dbm0
from rtpaudit.audio.progress import ProgressTone
from rtpaudit.media.events import TelephoneEvent
from rtpaudit.signalling.calls import SignallingMessage
from rtpaudit.units import MS_PER_S, NS_PER_S

if TYPE_CHECKING:
    from rtpaudit.assess.results import AssessedStream


@dataclass(slots=True)
class SignallingRow:
    """One message."""

    time_ns: int
    call: str
    from_: str
    to: str
    message: str
    line: str
    protocol: str
    transport: str
    call_id: str
    cseq: str
    status_code: int | None
    repeated: bool
    capture: str
    frame: int
    impersonal_line: str = ""
    """what may be shown where nobody is to be named"""


@dataclass(slots=True)
class EventRow:
    """One telephone event, or one key heard in the sound."""

    call: str
    stream: str
    time_ns: int
    from_s: float
    event: str
    digit: str
    duration_ms: float
    level_dbm0: float
    carried_as: str
    packets: int | None
    end_seen: bool | None


NAN = float("nan")


@dataclass(slots=True)
class ReportRow:
    """One report of a far end on one stream."""

    call: str
    stream: str
    time_ns: int
    report: str
    reporter: str
    reporter_ssrc: str
    interval_s: float = NAN
    packets_expected: int | None = None
    loss_pct: float = NAN
    captured_loss_pct: float = NAN
    packets_lost: int | None = None
    jitter_ms: float = NAN
    round_trip_ms: float = NAN
    discard_pct: float = NAN
    burst_density_pct: float = NAN
    burst_duration_ms: float = NAN
    gap_density_pct: float = NAN
    gap_duration_ms: float = NAN
    end_system_delay_ms: float = NAN
    signal_level_dbm0: float = NAN
    noise_level_dbm0: float = NAN
    echo_return_loss_db: float = NAN
    r_factor: float = NAN
    mos_lq: float = NAN
    mos_cq: float = NAN
    playout_delay_ms: float = NAN
    set_aside: str = ""


def signalling_row(message: SignallingMessage, call: str) -> SignallingRow:
    """A message as a row; ``call`` is "" where it belongs to none."""
    return SignallingRow(
        time_ns=message.time_ns,
        call=call,
        from_=message.source,
        to=message.destination,
        message=message.message,
        line=message.line,
        protocol=message.protocol,
        transport=message.transport,
        call_id=message.call_id,
        cseq=message.cseq,
        status_code=message.status_code,
        repeated=message.repeated,
        capture=message.capture,
        frame=message.frame,
        impersonal_line=message.impersonal_line,
    )


MASK = "x"
"""stands for a key where it is not to be told which: keys may be a card number"""


def event_rows(call: str, stream: str, events: Sequence[TelephoneEvent], digits: bool) -> list[EventRow]:
    """Telephone events of a stream as rows; keys are masked unless ``digits`` are asked for."""
    return [
        EventRow(
            call=call,
            stream=stream,
            time_ns=event.time_ns,
            from_s=event.begin_s,
            event=event.name,
            digit=event.digit if digits or not event.digit else MASK,
            duration_ms=event.duration_ms,
            level_dbm0=event.level_dbm0,
            carried_as="event",
            packets=event.packets,
            end_seen=event.end_seen,
        )
        for event in events
    ]


def tone_rows(one: "AssessedStream", digits: bool) -> list[EventRow]:
    """Keys and call-progress tones heard in the sound of a stream as rows."""
    sound = one.sound
    if sound is None:
        return []
    offset_s = (sound.origin_ns - one.started_ns) / NS_PER_S
    heard: list[tuple[Digit | ProgressTone, str, str]] = [
        *((one_digit, "digit", one_digit.digit if digits else MASK) for one_digit in sound.digits),
        *((tone, tone.name, "") for tone in sound.tones),
    ]
    rows = [
        EventRow(
            call=one.call,
            stream=one.id,
            time_ns=sound.origin_ns + round(row.from_s * NS_PER_S),
            from_s=row.from_s + offset_s,
            event=name,
            digit=digit,
            duration_ms=(row.to_s - row.from_s) * MS_PER_S,
            level_dbm0=dbm0(row.level_dbov, one.stream.encoding),
            carried_as="tone",
            packets=None,
            end_seen=None,
        )
        for row, name, digit in heard
    ]
    return sorted(rows, key=lambda row: row.time_ns)
