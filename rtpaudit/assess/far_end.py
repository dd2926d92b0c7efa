"""What the far receiver's reports say of a stream, beside what this capture saw: loss on both sides, round trip."""

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from rtpaudit.assess.reported import FarEnd, Reported
from rtpaudit.assess.stream import Measured
from rtpaudit.media.calls import Call
from rtpaudit.media.streams import Stream
from rtpaudit.metrics.reports import (
    between_reports,
    doubts,
    half_trip_ms,
    referred_reports,
    whole_trip_ms,
)
from rtpaudit.signalling.rtcp import ReportBlock
from rtpaudit.units import MS_PER_S, percent

LONGEST_TRIP_MS = 5000.0
"""a round trip beyond this is a fault of clocks (common practice)"""
NAN = float("nan")
Floats = NDArray[np.float64]


def far_ends(
    measured: Sequence[Measured], calls: Sequence[Call], reported: Mapping[int, Reported]
) -> list[FarEnd | None]:
    """What was reported on every stream, None where nothing was; ``reported`` is the RTCP of each recording."""
    answered = {id(stream): call for call in calls for stream in call.streams}
    found: list[FarEnd | None] = []
    for one in measured:
        said = reported.get(one.stream.recording)
        found.append(_reports_on(one, said, answered.get(id(one.stream))) if said is not None else None)
    by_stream = {id(one.stream): far for one, far in zip(measured, found, strict=True)}
    for call in calls:
        for ways in ((call.from_caller, call.from_callee), (call.from_callee, call.from_caller)):
            for stream in ways[0]:
                far = by_stream[id(stream)]
                if far is not None:
                    far.round_trip_ms = _round_trip(far, [by_stream[id(mate)] for mate in ways[1]])
    return found


def _round_trip(far: FarEnd, mates: Sequence[FarEnd | None]) -> float:
    """Both halves: to this stream's receiver, and to its sender, which receives the mates."""
    to_sender = np.concatenate([far.sender_trips_ms, *(mate.half_trips_ms for mate in mates if mate is not None)])
    whole = whole_trip_ms(far.half_trips_ms, to_sender)
    return whole if whole <= LONGEST_TRIP_MS else NAN


def _reports_on(one: Measured, said: Reported, call: Call | None) -> FarEnd | None:
    stream = one.stream
    blocks, metrics = said.blocks_on(stream), said.metrics_on(stream)
    if not blocks and not metrics:
        return None
    far = FarEnd(blocks=blocks, metrics=metrics)
    for which, name in ((said.trips_to_receiver, "half_trips_ms"), (said.trips_to_sender, "sender_trips_ms")):
        trips = which(stream, blocks)
        referred = referred_reports(trips.last, trips.time_ns, trips.middle, trips.sent_ns)
        setattr(far, name, half_trip_ms(trips.sent_ns, trips.time_ns, trips.delay, referred))
    if blocks:
        _judge(far, one, _saw_the_start(stream, call))
    return far


def _saw_the_start(stream: Stream, call: Call | None) -> bool:
    """Whether the capture holds the stream from its first packet on: its call was answered within the capture."""
    said = call.signalled if call is not None else None
    return (
        said is not None and said.answered_ns is not None and not said.began_before and stream.packets.segment[0] == 0
    )


def _judge(far: FarEnd, one: Measured, from_start: bool) -> None:
    blocks = [said.block for said in far.blocks if isinstance(said.block, ReportBlock)]
    packets = one.stream.packets
    highest = np.array([block.highest_sequence for block in blocks], np.uint32)
    lost = np.array([block.cumulative_lost for block in blocks], np.int32)
    far.between = between_reports(highest, lost)
    shown = _captured_highest(one, np.array([said.time_ns for said in far.blocks], np.int64))
    far.set_aside = doubts(
        [block.fraction_lost for block in blocks],
        far.between,
        highest,
        np.where(shown >= 0, shown & 0xFFFF, -1),
        far.half_trips_ms,
    )
    good = [k for k, why in enumerate(far.set_aside) if not why and shown[k] >= 0]
    rate = one.stream.clock_rate_hz
    if good and rate:
        far.reported_jitter_ms = blocks[good[-1]].jitter * MS_PER_S / rate
    # The reporter counts wraps in its own way: its number is the one nearest to what the capture shows.
    apart = (highest.astype(np.int64) - shown + 0x8000) % 0x10000 - 0x8000
    reached = shown + apart
    missing = _missing_up_to(one, reached)
    far.captured_loss_pct = _interval_loss(reached, missing)
    if one.network.segments == 1 and good:
        _both_sides(far, good, reached, missing, lost, int(packets.extended.min()), from_start)


def _captured_highest(one: Measured, at_ns: NDArray[np.int64]) -> NDArray[np.int64]:
    """Highest extended number that the capture had shown at each time, -1 where none."""
    packets = one.stream.packets
    reached = np.maximum.accumulate(packets.time_ns)
    highest = np.maximum.accumulate(packets.extended) if one.network.segments == 1 else packets.extended
    place = np.searchsorted(reached, at_ns, side="right") - 1
    return np.where(place >= 0, highest[np.maximum(place, 0)], -1)


def _missing_up_to(one: Measured, number: NDArray[np.int64]) -> NDArray[np.int64]:
    """Missing packets up to each extended number."""
    gaps = one.network.gaps
    order = np.argsort(gaps.first_missing, kind="stable")
    first, count = gaps.first_missing[order], gaps.packets_missing[order]
    whole = np.concatenate([[0], np.cumsum(count)])
    run = np.searchsorted(first, number, side="right")
    # The last run that begins by then may reach beyond the number.
    beyond = np.zeros(len(number), np.int64)
    inside = run > 0
    last = run[inside] - 1
    beyond[inside] = np.maximum(first[last] + count[last] - 1 - number[inside], 0)
    return np.asarray(whole[run] - beyond, np.int64)


def _interval_loss(reached: NDArray[np.int64], missing: NDArray[np.int64]) -> Floats:
    expected = np.concatenate([[np.nan], np.diff(reached)])
    lost = np.concatenate([[np.nan], np.diff(missing)])
    return np.asarray(np.divide(100.0 * lost, expected, out=np.full(len(lost), np.nan), where=expected > 0))


def _both_sides(
    far: FarEnd,
    good: Sequence[int],
    reached: NDArray[np.int64],
    missing: NDArray[np.int64],
    lost: NDArray[np.int32],
    first: int,
    from_start: bool,
) -> None:
    """Loss before and after the capture point, over all that the believed reports cover."""
    last, base = good[-1], good[0]
    if from_start or len(good) == 1:
        expected, reported, captured = int(reached[last]) - first + 1, int(lost[last]), int(missing[last])
    else:
        expected = int(reached[last] - reached[base])
        reported, captured = int(lost[last]) - int(lost[base]), int(missing[last] - missing[base])
    if expected <= 0:
        return
    far.packets_reported = expected
    far.reported_loss_pct = percent(max(reported, 0), expected)
    far.loss_before_pct = percent(min(captured, max(reported, 0)), expected)
    far.loss_after_pct = percent(max(reported - captured, 0), expected)
