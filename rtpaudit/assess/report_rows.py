"""Reports of far ends as rows: report blocks and voice-quality blocks of RTCP, and reports in SIP bodies (RFC 6035)."""

from collections.abc import Sequence

import numpy as np

from rtpaudit.assess.reported import FarEnd
from rtpaudit.assess.results import AssessedStream
from rtpaudit.assess.rows import NAN, ReportRow
from rtpaudit.signalling.quality_reports import MediaEnd, QualityMetrics, QualityReport
from rtpaudit.signalling.rtcp import ReportBlock
from rtpaudit.signalling.rtcp_voip import VoipMetrics
from rtpaudit.units import MS_PER_S, NS_PER_S

_METRICS = (
    "loss_pct",
    "discard_pct",
    "burst_density_pct",
    "burst_duration_ms",
    "gap_density_pct",
    "gap_duration_ms",
    "round_trip_ms",
    "end_system_delay_ms",
    "signal_level_dbm0",
    "noise_level_dbm0",
    "echo_return_loss_db",
    "r_factor",
    "mos_lq",
    "mos_cq",
)
"""what a voice-quality block and a report of RFC 6035 both have, under one name"""


def far_end_rows(one: AssessedStream) -> list[ReportRow]:
    """The RTCP reports on a stream, by time."""
    far = one.far_end
    if far is None:
        return []
    rows = [_block_row(one, far, k) for k in range(len(far.blocks))]
    for said in far.metrics:
        assert isinstance(said.block, VoipMetrics)
        row = ReportRow(one.call, one.id, said.time_ns, "extended", said.source, f"0x{said.reporter:08x}")
        for name in _METRICS:
            setattr(row, name, float(getattr(said.block, name)))
        row.playout_delay_ms = float(said.block.playout_nominal_ms) or NAN
        rows.append(row)
    return sorted(rows, key=lambda row: row.time_ns)


def _block_row(one: AssessedStream, far: FarEnd, k: int) -> ReportRow:
    said = far.blocks[k]
    assert isinstance(said.block, ReportBlock)
    row = ReportRow(one.call, one.id, said.time_ns, said.kind, said.source, f"0x{said.reporter:08x}")
    block, rate = said.block, one.stream.clock_rate_hz
    row.packets_lost = block.cumulative_lost
    row.loss_pct = block.fraction_lost * 100.0 / 256.0
    row.jitter_ms = block.jitter * MS_PER_S / rate if rate else NAN
    row.captured_loss_pct = float(far.captured_loss_pct[k])
    row.set_aside = far.set_aside[k]
    if k:
        row.interval_s = (said.time_ns - far.blocks[k - 1].time_ns) / NS_PER_S
        if far.between is not None and far.between.expected[k] >= 0:
            row.packets_expected = int(far.between.expected[k])
    if not np.isnan(far.round_trip_ms) and not np.isnan(far.half_trips_ms[k]):
        # The half that this report shows, and the usual length of the other.
        usual = float(np.nanmedian(far.half_trips_ms))
        row.round_trip_ms = max(far.half_trips_ms[k] + far.round_trip_ms - usual, 0.0)
    return row


def quality_rows(reports: Sequence[QualityReport], streams: Sequence[AssessedStream]) -> list[ReportRow]:
    """Reports of RFC 6035 on the streams that they speak of; both ways where both are told."""
    rows = []
    spoken_of = _SpokenOf(streams) if reports else None
    for report in reports:
        ways: list[tuple[MediaEnd, MediaEnd, QualityMetrics | None]] = [
            (report.remote_end, report.local_end, report.local),
            (report.local_end, report.remote_end, report.remote),
        ]
        for sender, receiver, metrics in ways:
            stream = spoken_of.stream(sender, receiver) if metrics is not None and spoken_of else None
            if metrics is not None and stream is not None:
                rows.append(_quality_row(report, metrics, stream))
    return rows


class _SpokenOf:
    """Finds the stream that a report speaks of, among thousands."""

    def __init__(self, streams: Sequence[AssessedStream]) -> None:
        self._by_ssrc: dict[int, list[AssessedStream]] = {}
        self._to: dict[tuple[str, int], AssessedStream] = {}
        self._of: dict[tuple[str, int], AssessedStream] = {}
        for one in streams:
            self._by_ssrc.setdefault(one.stream.ssrc, []).append(one)
            self._to.setdefault((one.stream.destination, one.stream.destination_port), one)
            self._of.setdefault((one.stream.source, one.stream.source_port), one)

    def stream(self, sender: MediaEnd, receiver: MediaEnd) -> AssessedStream | None:
        """The stream from one end to the other: by SSRC, else by the receiving place, else by the sending one."""
        mine = self._by_ssrc.get(sender.ssrc, []) if sender.ssrc is not None else []
        if mine:
            near = [one for one in mine if receiver.address in ("", one.stream.destination)]
            return (near or mine)[0]
        return self._to.get(_place(receiver)) or self._of.get(_place(sender))


def _place(end: MediaEnd) -> tuple[str, int]:
    return end.address, end.port


def _quality_row(report: QualityReport, metrics: QualityMetrics, stream: AssessedStream) -> ReportRow:
    row = ReportRow(stream.call, stream.id, report.time_ns, "session", report.source, "")
    for name in _METRICS:
        setattr(row, name, getattr(metrics, name))
    row.jitter_ms = metrics.jitter_ms
    row.playout_delay_ms = metrics.playout_nominal_ms
    row.set_aside = "; ".join(metrics.set_aside)
    return row
