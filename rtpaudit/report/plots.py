"""What the plots of a call draw, as plain values: arrivals against the playout deadline, losses, ratings, the curve.

Times are milliseconds since the call began, where nothing else is said. What is too much for a screen is thinned so
that no extreme gets lost.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.results import AssessedStream
from rtpaudit.metrics.delay import delay_variation, delays
from rtpaudit.profile import Playout
from rtpaudit.report.plain import number, numbers
from rtpaudit.units import NS_PER_MS

Indices = NDArray[np.int64]

TENTHS = 10.0
"""delays are told in tenths of a millisecond"""
WINDOW_S = 2.0
FARTHEST_MS = 1e7
"""nearly three hours: beyond it a delay is an artefact of timestamps, and as good as there"""


@dataclass(frozen=True, slots=True)
class Detail:
    """How much of a call goes into the page."""

    envelope: int
    """steps of a waveform"""
    arrivals: int
    """points of delay"""
    marks: int
    """losses, and late packets, each"""
    rows: int
    """messages, events, reports, each"""


FINEST = Detail(envelope=16_000, arrivals=5000, marks=4000, rows=1000)
FINE = Detail(envelope=8000, arrivals=3000, marks=2000, rows=500)
COARSE = Detail(envelope=4000, arrivals=2000, marks=1000, rows=200)
DETAIL = ((3, FINEST), (12, FINE))
"""up to so many calls the page affords so much of each"""


def detail_for(calls: int) -> Detail:
    """How much of each call a page with so many calls shows."""
    return next((detail for most, detail in DETAIL if calls <= most), COARSE)


def lanes(one: AssessedStream, begin_ns: int, detail: Detail) -> dict[str, Any]:
    """All that the tape draws of one stream but its sound."""
    return {
        "begin": _ms(one.started_ns, begin_ns),
        "end": _ms(one.ended_ns, begin_ns),
        "packet_ms": number(one.stream.packet_time_ms),
        "windows": windows(one),
        "gaps": gaps(one, begin_ns, detail.marks),
        "gaps_in_all": len(one.gaps.at_ns),
        **arrivals(one, begin_ns, detail),
    }


def windows(one: AssessedStream) -> dict[str, Any]:
    """Ratings and what they rest on, every two seconds from the begin of the stream; no key where there is nothing."""
    table = one.windows
    columns: dict[str, Any] = {
        "r": numbers(table.r_factor),
        "lost": table.packets_lost.tolist(),
        "late": [] if table.packets_discarded is None else table.packets_discarded.tolist(),
        "expected": table.packets_expected.tolist(),
        "jitter": numbers(table.jitter_ms),
        "level": numbers(table.level_dbov, 0),
    }
    return {name: cells for name, cells in columns.items() if any(cells)} | {"count": len(table.from_s)}


def gaps(one: AssessedStream, begin_ns: int, most: int) -> list[list[Any]]:
    """Begin, length [ms] and packets of each gap, where the sound is missing; of too many the longest."""
    table = one.gaps
    kept = np.sort(np.argsort(-table.packets_missing, kind="stable")[:most])
    packet_ms = one.stream.packet_time_ms if one.stream.packet_time_ms > 0 else 0.0
    begin = (table.at_ns[kept] - begin_ns) / NS_PER_MS + packet_ms
    length = np.where(np.isnan(table.duration_ms[kept]), packet_ms, table.duration_ms[kept])
    return [
        list(row) for row in zip(numbers(begin), numbers(length), table.packets_missing[kept].tolist(), strict=True)
    ]


def arrivals(one: AssessedStream, begin_ns: int, detail: Detail) -> dict[str, Any]:
    """Delay of the packets beyond the least, on the same scale the deadline of the buffer, and what was late."""
    if one.playback is None or not len(one.playback.rows):
        return {}
    packets, rows, played = one.stream.packets, one.playback.rows, one.playback.played
    time_ns = packets.time_ns[rows]
    found = delays(time_ns, packets.media_ticks[rows], packets.segment[rows], one.stream.clock_rate_hz)
    delay = np.clip(delay_variation(found, one.figures.clock_skew_ppm), 0.0, FARTHEST_MS)
    spare = np.clip((played.playout_ns - time_ns) / NS_PER_MS, -FARTHEST_MS, FARTHEST_MS)
    at = np.rint((time_ns - begin_ns) / NS_PER_MS).astype(np.int64)
    late = np.flatnonzero(~played.played)
    kept = extremes(delay, detail.arrivals)
    kept = kept[played.played[kept]]
    shown_late = late[np.sort(np.argsort(spare[late], kind="stable")[: detail.marks])]
    deadline = delay + spare
    steps = _steps(deadline, detail.marks)
    return {
        # Each as the difference from the one before: short to write.
        "at": np.diff(at[kept], prepend=0).tolist(),
        "delay": _tenths(delay[kept]),
        "late": [list(row) for row in zip(at[shown_late].tolist(), _tenths(delay[shown_late]),
                                          _tenths(-spare[shown_late]), strict=True)],
        "late_in_all": len(late),
        "deadline": [list(row) for row in zip(at[steps].tolist(), _tenths(deadline[steps]), strict=True)],
    }  # fmt: skip


def extremes(values: NDArray[np.float64], most: int) -> Indices:
    """Places of the least and greatest value of each of ``most / 2`` stretches, in order; all where they are few."""
    count = len(values)
    if count <= most:
        return np.arange(count)
    edges = np.linspace(0, count, most // 2 + 1).astype(np.int64)
    length = int(np.diff(edges).max())
    place = np.minimum(edges[:-1, None] + np.arange(length), edges[1:, None] - 1)
    table = values[place]
    rows = np.arange(len(place))
    chosen = np.concatenate([place[rows, table.argmin(axis=1)], place[rows, table.argmax(axis=1)]])
    return np.unique(chosen)


def curve(one: AssessedStream, settings: Playout) -> dict[str, Any] | None:
    """Rating against the delay of a fixed playout buffer, with today's setting and the best; None without playback."""
    found = one.curve
    if found is None:
        return None
    rated = not np.isnan(found.r_factor).any()
    delay_ms = settings.nominal_ms if settings.kind == "fixed" else one.figures.playout_delay_ms
    return {
        "stream": one.id,
        "delay_ms": numbers(found.delay_ms),
        "r": numbers(found.r_factor, 2) if rated else [],
        "late_pct": numbers(found.discard_pct, 3),
        "today": [number(delay_ms), number(one.figures.r_factor)],
        "best": [number(found.best_ms), number(found.best_r)],
    }


def _steps(values: NDArray[np.float64], most: int) -> Indices:
    """Places at which a value that keeps still changes, the first and the last; of too many the greatest changes."""
    change = np.abs(np.diff(values))
    changes = np.flatnonzero(change >= 1.0 / TENTHS) + 1
    if len(changes) > most:
        changes = np.sort(changes[np.argsort(-change[changes - 1], kind="stable")[:most]])
    return np.unique(np.concatenate([[0], changes, [len(values) - 1]])).astype(np.int64)


def _tenths(values: NDArray[np.float64]) -> list[int]:
    return [round(one) for one in (values * TENTHS).tolist()]


def _ms(time_ns: int, begin_ns: int) -> float:
    return round((time_ns - begin_ns) / NS_PER_MS, 1)
