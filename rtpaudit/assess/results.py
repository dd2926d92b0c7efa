"""What assess hands on: figures of streams and calls under the names of the columns that people read."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, fields

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.hearing import PayloadSigns, StreamSound
from rtpaudit.assess.pairs import CallSound
from rtpaudit.assess.playback import Playback
from rtpaudit.assess.reported import FarEnd, Reported
from rtpaudit.assess.rows import EventRow, ReportRow, SignallingRow
from rtpaudit.capture.frames import Damage, Interface
from rtpaudit.decode.icmp import IcmpError
from rtpaudit.emodel.budget import Budget
from rtpaudit.media.streams import Stream
from rtpaudit.signalling.calls import MediaTerm, SipCall

NAN = float("nan")


@dataclass(slots=True)
class StreamFigures:
    """Figures of one stream. Each field is a column of the streams table; NaN or "" where there is no value."""

    segments: int = 1
    packets_captured: int = 0
    packets_received: int = 0
    packets_expected: int = 0
    packets_lost: int = 0
    loss_pct: float = NAN
    packets_duplicated: int = 0
    packets_reordered: int = 0
    packets_recovered: int = 0
    sequence_gaps: int = 0
    longest_gap_packets: int = 0
    jitter_ms: float = NAN
    jitter_max_ms: float = NAN
    jitter_last_ms: float = NAN
    pdv_p50_ms: float = NAN
    pdv_p95_ms: float = NAN
    pdv_p99_ms: float = NAN
    pdv_max_ms: float = NAN
    clock_skew_ppm: float = NAN
    dscp: int = 0
    playout_delay_ms: float = NAN
    packets_discarded: int | None = None
    discard_pct: float = NAN
    burst_ratio: float = NAN
    burst_density_pct: float = NAN
    burst_duration_ms: float = NAN
    gap_density_pct: float = NAN
    gap_duration_ms: float = NAN
    reported_loss_pct: float = NAN
    reported_jitter_ms: float = NAN
    round_trip_ms: float = NAN
    loss_before_pct: float = NAN
    loss_after_pct: float = NAN
    one_way_delay_ms: float = NAN
    delay_basis: str = ""
    ie_eff: float = NAN
    r_factor: float = NAN
    mos_cqe: float = NAN
    r_factor_low: float = NAN
    r_factor_high: float = NAN
    rating_note: str = ""
    quality_band: str = ""
    speech_level_dbov: float = NAN
    activity_pct: float = NAN
    noise_level_dbov: float = NAN
    clipped_pct: float = NAN


@dataclass(slots=True)
class GapColumns:
    """Runs of missing sequence numbers of one stream, in order of the stream. Shape (gaps,)."""

    first_missing: NDArray[np.int64]
    packets_missing: NDArray[np.int64]
    at_ns: NDArray[np.int64]
    duration_ms: NDArray[np.float64]
    after_s: NDArray[np.float64]


@dataclass(slots=True)
class WindowColumns:
    """The 2-second windows of one stream. Shape (windows,)."""

    from_s: NDArray[np.float64]
    packets_expected: NDArray[np.int64]
    packets_lost: NDArray[np.int64]
    packets_discarded: NDArray[np.int64] | None
    loss_pct: NDArray[np.float64]
    jitter_ms: NDArray[np.float64]
    pdv_p95_ms: NDArray[np.float64]
    r_factor: NDArray[np.float64]
    activity_pct: NDArray[np.float64]
    level_dbov: NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class BufferCurve:
    """R against the delay of a fixed playout buffer, from the same arrivals. Arrays of shape (delays,)."""

    delay_ms: NDArray[np.float64]
    discard_pct: NDArray[np.float64]
    r_factor: NDArray[np.float64]
    """NaN throughout where the encoding has no values"""
    best_ms: float
    """least delay whose rating is within half a point of the best; NaN without ratings"""
    best_r: float


@dataclass(slots=True)
class AssessedStream:
    """A stream at the end of its way along the benches."""

    id: str
    call: str
    """id of its call, "" where it makes none (video)"""
    stream: Stream
    started_ns: int
    ended_ns: int
    figures: StreamFigures
    gaps: GapColumns
    windows: WindowColumns
    budget: Budget | None = None
    """how the rating goes from Ro down to R; NaN throughout where there is none"""
    playback: Playback | None = None
    """None where the stream has no audio or no known clock"""
    far_end: FarEnd | None = None
    """what the far receiver reported, None where it said nothing"""
    sound: StreamSound | None = None
    """None where the sound was not looked at, or cannot be decoded"""
    signs: PayloadSigns | None = None
    """of the payload octets; None where they were not looked at"""
    work_out_curve: Callable[[], BufferCurve] | None = None
    """None where there is no playback"""
    _curve: BufferCurve | None = None

    @property
    def curve(self) -> BufferCurve | None:
        """R against the delay of the buffer; worked out when it is first asked for."""
        if self._curve is None and self.work_out_curve is not None:
            self._curve = self.work_out_curve()
        return self._curve


@dataclass(slots=True)
class CallFigures:
    """Figures of one call. Each field is a column of the calls table; NaN or "" where there is no value."""

    caller_hears_r: float = NAN
    callee_hears_r: float = NAN
    r_factor: float = NAN
    mos_cqe: float = NAN
    quality_band: str = ""
    loss_pct: float = NAN
    jitter_ms: float = NAN
    one_way_delay_ms: float = NAN


@dataclass(slots=True)
class AssessedCall:
    """A call leg with its streams."""

    id: str
    conversation: str
    capture: str
    call_id: str
    caller: str
    callee: str
    started_ns: int
    answered_ns: int | None
    ended_ns: int
    duration_s: float
    outcome: str
    status_code: int | None
    setup_delay_s: float
    release_by: str
    encoding: str
    from_caller: list[AssessedStream]
    """what the caller said, so what the callee hears"""
    from_callee: list[AssessedStream]
    figures: CallFigures
    headline: str = ""
    signalled: SipCall | None = None
    """what the endpoints said of it"""
    unseen: list[MediaTerm] = field(default_factory=list)
    """audio that a side asked for and that never came"""
    sound: CallSound | None = None
    """what only both directions together tell; None without sound both ways"""
    near: str = ""
    """side at which the user says that the capture was taken: caller, callee, unknown, or "" without such a word"""

    @property
    def streams(self) -> list[AssessedStream]:
        """Both directions, in id order."""
        return sorted(self.from_caller + self.from_callee, key=lambda one: int(one.id[1:]))


@dataclass(frozen=True, slots=True)
class RecordingFacts:
    """What is known of one recording besides its packets."""

    name: str
    interfaces: tuple[Interface, ...] = ()
    """of all its files, with the counts of the capture host where it gave any"""
    unreachable: tuple[IcmpError, ...] = ()
    """ICMP errors on UDP: who refused what"""
    skipped: Mapping[str, int] = field(default_factory=dict)
    """frames that carried no UDP, TCP or ICMP, by reason"""
    ssrcs: frozenset[int] = frozenset()
    """of all audio streams, also where the audit was narrowed to a few"""
    last_ns: int = 0
    """last sign of life of any stream, call or message, likewise"""


@dataclass(slots=True)
class Assessment:
    """All that one audit found out, before findings."""

    captures: list[str]
    streams: list[AssessedStream] = field(default_factory=list)
    calls: list[AssessedCall] = field(default_factory=list)
    damage: list[Damage] = field(default_factory=list)
    messages: list[SignallingRow] = field(default_factory=list)
    """in order of time"""
    events: list[EventRow] = field(default_factory=list)
    reports: list[ReportRow] = field(default_factory=list)
    recordings: list[RecordingFacts] = field(default_factory=list)
    calls_in_all: int = 0
    """before the audit was narrowed to some of them"""
    reported: Mapping[int, Reported] = field(default_factory=dict)
    """the RTCP of each recording, also on streams that the capture does not hold"""


STREAM_FIGURES = tuple(one.name for one in fields(StreamFigures))
CALL_FIGURES = tuple(one.name for one in fields(CallFigures))
