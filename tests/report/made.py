"""Assessed streams and calls made by hand, for tests of what becomes of them."""

from types import SimpleNamespace
from typing import Any

import numpy as np

from rtpaudit.assess.results import (
    AssessedCall,
    AssessedStream,
    Assessment,
    CallFigures,
    GapColumns,
    StreamFigures,
    WindowColumns,
)
from rtpaudit.capture.frames import Damage
from rtpaudit.columns import TABLES
from rtpaudit.media.streams import Stream, StreamPackets
from rtpaudit.profile import Profile
from rtpaudit.report.tables import build_tables
from rtpaudit.report.wav import Sound

BEGIN_NS = 1_700_000_000_000_000_000
"""2023-11-14T22:13:20Z"""
SECOND = 1_000_000_000


def no_packets() -> StreamPackets:
    names = StreamPackets.__dataclass_fields__
    return StreamPackets(**{name: np.empty(0, np.int64) for name in names})


def gaps(*rows: tuple[int, int, int, float, float]) -> GapColumns:
    """Rows of first missing number, packets missing, arrival, media time and seconds since the stream began."""
    columns = list(zip(*rows, strict=True)) or [[]] * 5
    return GapColumns(
        *(np.array(column, np.int64) for column in columns[:3]), *(np.array(column, float) for column in columns[3:])
    )


def windows(count: int, discarded: bool = False) -> WindowColumns:
    ones = np.ones(count)
    return WindowColumns(
        from_s=2.0 * np.arange(count),
        packets_expected=np.full(count, 100),
        packets_lost=np.zeros(count, np.int64),
        packets_discarded=np.full(count, 3) if discarded else None,
        loss_pct=0.0 * ones,
        jitter_ms=1.5 * ones,
        pdv_p95_ms=4.0 * ones,
        r_factor=90.0 * ones,
        activity_pct=np.nan * ones,
        level_dbov=np.nan * ones,
    )


def stream(id: str, call: str = "", begin_s: float = 0.0, **changed: Any) -> AssessedStream:
    facts: dict[str, Any] = {
        "recording": 0,
        "capture": "complaint.pcap",
        "flow": 0,
        "source": "192.0.2.10",
        "source_port": 4000,
        "destination": "198.51.100.20",
        "destination_port": 5000,
        "ssrc": 0x2A,
        "packets": no_packets(),
        "payload_type": 0,
        "encoding": "PCMU",
        "clock_rate_hz": 8000,
        "sampling_rate_hz": 8000,
        "packet_time_ms": 20.0,
        "clock_basis": "static",
        "match_basis": "mirror",
    }
    own = {name: changed.pop(name) for name in ("gaps", "windows") if name in changed}
    figures = {name: changed.pop(name) for name in list(changed) if name in StreamFigures.__dataclass_fields__}
    begin = BEGIN_NS + round(begin_s * SECOND)
    return AssessedStream(
        id=id,
        call=call,
        stream=Stream(**facts | changed),
        started_ns=begin,
        ended_ns=begin + 10 * SECOND,
        figures=StreamFigures(**figures),
        gaps=own.get("gaps", gaps()),
        windows=own.get("windows", windows(0)),
    )


def call(id: str, there: list[AssessedStream], back: list[AssessedStream], **changed: Any) -> AssessedCall:
    figures = {name: changed.pop(name) for name in list(changed) if name in CallFigures.__dataclass_fields__}
    facts: dict[str, Any] = {
        "conversation": id,
        "capture": "complaint.pcap",
        "call_id": "",
        "caller": "192.0.2.10",
        "callee": "198.51.100.20",
        "started_ns": BEGIN_NS,
        "answered_ns": None,
        "ended_ns": BEGIN_NS + 10 * SECOND,
        "duration_s": 10.0,
        "outcome": "media only",
        "status_code": None,
        "setup_delay_s": float("nan"),
        "release_by": "",
        "encoding": "PCMU",
    }
    return AssessedCall(id=id, from_caller=there, from_callee=back, figures=CallFigures(**figures), **facts | changed)


def mirrored(**changed: Any) -> dict[str, Any]:
    """Facts of the stream that goes back."""
    return {
        "source": "198.51.100.20",
        "source_port": 5000,
        "destination": "192.0.2.10",
        "destination_port": 4000,
    } | changed


def assessment() -> Assessment:
    """One good call, one whose callee's stream lost packets in a run, a lone video stream, and a cut file."""
    good = [stream("s01", "c01"), stream("s02", "c01", **mirrored())]
    bad = [
        stream("s03", "c02", 60.0, source="2001:db8::10", destination="2001:db8::20", windows=windows(5)),
        stream(
            "s04",
            "c02",
            60.0,
            source="2001:db8::20",
            destination="2001:db8::10",
            packets_expected=500,
            packets_received=488,
            packets_lost=12,
            loss_pct=2.4,
            gaps=gaps((65530, 12, BEGIN_NS + 62 * SECOND, 240.0, 2.0)),
            windows=windows(5),
        ),
    ]
    video = stream("s05", "", 61.0, encoding="H264", media="video", sampling_rate_hz=0)
    return Assessment(
        captures=["complaint.pcap"],
        streams=[*good, *bad, video],
        calls=[
            call("c01", good[:1], good[1:], r_factor=93.2, caller_hears_r=93.2, callee_hears_r=93.2,
                 quality_band="best", loss_pct=0.0, jitter_ms=0.4),
            call("c02", bad[:1], bad[1:], caller="2001:db8::10", callee="2001:db8::20",
                 started_ns=BEGIN_NS + 60 * SECOND, r_factor=61.0, caller_hears_r=61.0, callee_hears_r=93.2,
                 quality_band="low", loss_pct=2.4, jitter_ms=3.1),
        ],
        damage=[Damage("complaint.pcap", 4242, "a record that the file ends within", "1 frame")],
    )  # fmt: skip


def row(table: str, **cells: Any) -> SimpleNamespace:
    """A row of one of the later tables, empty but for the cells that are given."""
    empty = {"text": "", "count": None, "number": float("nan"), "time": BEGIN_NS, "yes_no": None}
    names = {one.name: f"{one.name}_ns" if one.kind == "time" else one.name for one in TABLES[table]} | {
        "from": "from_"
    }
    return SimpleNamespace(**{names[one.name]: empty[one.kind] for one in TABLES[table]} | cells)


class Tones:
    """A source in which every stream holds its own number, over and over."""

    def __init__(self, without_decoder: tuple[str, ...] = ()) -> None:
        self.without_decoder = without_decoder

    def why_silent(self, stream_id: str) -> str:
        return "no decoder for opus" if stream_id in self.without_decoder else ""

    def sent(self, stream_id: str) -> Sound:
        assert stream_id not in self.without_decoder
        return np.full(80, int(stream_id[1:]), np.int16), 8000

    def heard(self, stream_id: str) -> Sound:
        samples, rate = self.sent(stream_id)
        return -samples, rate

    def origin_ns(self, stream_id: str) -> int:
        return BEGIN_NS + int(stream_id[1:]) * SECOND

    def both(self, call: AssessedCall) -> Sound:
        return np.tile(np.array([[1, 2]], np.int16), (80, 1)), 8000


class Audited:
    """What a walk hands to the report, made of the assessment above or another."""

    def __init__(self, found: Assessment | None = None) -> None:
        self.assessment = found or assessment()
        self.tables = build_tables(self.assessment)
        self.profile = Profile()
        self.sound = Tones()
