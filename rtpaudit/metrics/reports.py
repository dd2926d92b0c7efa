"""What a far receiver's reports say in numbers: round trips, loss from report to report, and whether to believe them.

Columns are those of all reports of one reporter on one stream, in order of arrival. Delays in reports count 1/65536 s
throughout (RFC 3550, 6.4.1; RFC 3611, 4.5).

- ``round_trip_s``: by a reporter's own clock.
- ``referred_reports``: which sender report each block answers.
- ``half_trip_ms``: from the capture point to the reporter and back.
- ``whole_trip_ms``: both halves.
- ``between_reports``: packets expected and lost since the report before.
- ``fraction_lost``: the same in the units of a report.
- ``doubts``: why a report is not to be believed.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.units import MS_PER_S, NS_PER_MS

UNITS_PER_S = 65_536.0
NONE = -1
"""Index of a sender report that the capture does not hold."""

MAX_DROPOUT = 3000
"""How far the highest number reported may lie from the highest captured (RFC 3550, A.1). [packets]"""

SLACK_MS = 10.0
"""What a reporter's clock and its rounding may add to the delay that it reports (common practice). [ms]"""

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class BetweenReports:
    """Since the report before; NaN for the first. Shape (n,)."""

    expected: Floats
    """[packets]"""
    lost: Floats
    """negative where duplicates outnumber losses [packets]"""
    loss_pct: Floats
    """never negative; NaN where nothing was expected [%]"""


def round_trip_s(arrival: ArrayLike, last_report: ArrayLike, delay: ArrayLike) -> Floats:
    """Round trip that a sender works out when its report comes back: arrival minus last report minus delay.

    Parameters
    ----------
    arrival : uint32 array, shape (n,)
        Middle 32 bits of the NTP time at which the block arrived. [1/65536 s]
    last_report : uint32 array, shape (n,)
        LSR of a report block or LRR of a DLRR sub-block, 0 where there was none. [1/65536 s]
    delay : uint32 array, shape (n,)
        DLSR or DLRR. [1/65536 s]

    Returns
    -------
    float array, shape (n,)
        NaN where ``last_report`` is 0; negative where the delay is longer than the time between. [s]

    References
    ----------
    RFC 3550, 6.4.1 and figure 2; RFC 3611, 4.5.
    """
    arrived, last, held = (np.asarray(one, np.uint32) for one in (arrival, last_report, delay))
    signed = (arrived - last - held).astype(np.int32)
    return np.where(last != 0, signed / UNITS_PER_S, np.nan)


def referred_reports(
    last_report: ArrayLike, time_ns: ArrayLike, sent_middle: ArrayLike, sent_time_ns: ArrayLike
) -> Indices:
    """Which of the captured sender reports (or reference times) each block answers.

    Parameters
    ----------
    last_report : uint32 array, shape (n,)
        LSR or LRR of each block.
    time_ns : int64 array, shape (n,)
        Arrival of each block. [ns]
    sent_middle : uint32 array, shape (m,)
        Middle 32 bits of the NTP time stamp of each sender report. In any order.
    sent_time_ns : int64 array, shape (m,)
        Arrival of each sender report. [ns]

    Returns
    -------
    int64 array, shape (n,)
        Index of the last sender report with this time stamp that came no later than the block, -1 where there is none.

    References
    ----------
    RFC 3550, 6.4.1.
    """
    wanted, sent = np.asarray(last_report, np.int64), np.asarray(sent_middle, np.int64)
    times, sent_times = np.asarray(time_ns, np.int64), np.asarray(sent_time_ns, np.int64)
    if len(sent) == 0 or len(wanted) == 0:
        return np.full(len(wanted), NONE, np.int64)
    # One key of time stamp and rank of arrival: the search for both is one.
    ranks = np.unique(np.concatenate([times, sent_times]), return_inverse=True)[1]
    keys = sent << 31 | ranks[len(times) :]
    order = np.argsort(keys, kind="stable")
    place = np.searchsorted(keys[order], wanted << 31 | ranks[: len(times)], side="right") - 1
    found = order[np.maximum(place, 0)]
    return np.where((place >= 0) & (sent[found] == wanted) & (wanted != 0), found, NONE)


def half_trip_ms(sent_time_ns: ArrayLike, time_ns: ArrayLike, delay: ArrayLike, referred: ArrayLike) -> Floats:
    """Time from the capture point to the reporter and back: the part of the round trip behind the capture point.

    Parameters
    ----------
    sent_time_ns : int64 array, shape (m,)
        Arrival of the sender reports at the capture point. [ns]
    time_ns : int64 array, shape (n,)
        Arrival of the blocks that answer them. [ns]
    delay : uint32 array, shape (n,)
        DLSR or DLRR. [1/65536 s]
    referred : int64 array, shape (n,)
        From ``referred_reports``.

    Returns
    -------
    float array, shape (n,)
        NaN where the sender report was not captured; below 0 where the delay is longer than the time between. [ms]

    References
    ----------
    RFC 3550, 6.4.1, with the capture point in the sender's place.
    """
    index = np.asarray(referred, np.int64)
    sent = np.asarray(sent_time_ns, np.int64)
    if len(sent) == 0:
        return np.full(len(index), np.nan)
    between_ms = (np.asarray(time_ns, np.int64) - sent[np.maximum(index, 0)]) / NS_PER_MS
    trip = between_ms - np.asarray(delay, np.float64) / UNITS_PER_S * MS_PER_S
    return np.where(index >= 0, trip, np.nan)


def whole_trip_ms(one_side_ms: ArrayLike, other_side_ms: ArrayLike) -> float:
    """Round trip between the endpoints: the halves on both sides of the capture point, the median of each.

    Parameters
    ----------
    one_side_ms, other_side_ms : float array, shape (n,) and (m,)
        From ``half_trip_ms``. NaN is passed over; what is negative by a clock's slack at most counts as 0. [ms]

    Returns
    -------
    float
        NaN where one of the sides has no round trip: the other half alone says nothing of the whole. [ms]

    References
    ----------
    RFC 3550, 6.4.1; the median because single reports wait for processors (common practice).
    """
    return _median(one_side_ms) + _median(other_side_ms)


def _median(trips_ms: ArrayLike) -> float:
    trips = np.asarray(trips_ms, np.float64)
    trips = trips[trips >= -SLACK_MS]
    return float(np.median(np.maximum(trips, 0.0))) if len(trips) else float("nan")


def between_reports(highest_sequence: ArrayLike, cumulative_lost: ArrayLike) -> BetweenReports:
    """Packets expected and lost from each report to the next.

    Parameters
    ----------
    highest_sequence : uint32 array, shape (n,)
        Extended highest sequence number received.
    cumulative_lost : int32 array, shape (n,)
        Signed.

    Returns
    -------
    BetweenReports

    References
    ----------
    RFC 3550, 6.4.4 and A.3.
    """
    highest = np.asarray(highest_sequence, np.uint32)
    if len(highest) == 0:
        return BetweenReports(np.empty(0), np.empty(0), np.empty(0))
    # As signed numbers: a report that came late, or of a reporter that started anew, goes back.
    expected = np.concatenate([[np.nan], np.diff(highest).astype(np.int32)])
    lost = np.concatenate([[np.nan], np.diff(np.asarray(cumulative_lost, np.int64))])
    share = np.divide(100.0 * np.maximum(lost, 0.0), expected, out=np.full(len(lost), np.nan), where=expected > 0)
    return BetweenReports(expected, lost, share)


def fraction_lost(expected: ArrayLike, received: ArrayLike) -> NDArray[np.int64]:
    """Loss of an interval as a report gives it: 0 where duplicates hide all of it.

    Parameters
    ----------
    expected, received : int array, shape (n,)
        In the interval, duplicates counted as received. [packets]

    Returns
    -------
    int64 array, shape (n,)
        At most 255. [1/256]

    References
    ----------
    RFC 3550, A.3.
    """
    wanted, got = np.asarray(expected, np.int64), np.asarray(received, np.int64)
    lost = np.maximum(wanted - got, 0)
    shares: NDArray[np.int64] = np.minimum((lost << 8) // np.maximum(wanted, 1), 255)
    return shares


def doubts(
    fraction: ArrayLike,
    between: BetweenReports,
    highest_sequence: ArrayLike,
    captured_highest: ArrayLike,
    half_trips_ms: ArrayLike,
) -> list[str]:
    """Why each report is not to be believed, one clause; empty where nothing speaks against it.

    Parameters
    ----------
    fraction : int array, shape (n,)
        Fraction lost. [1/256]
    between : BetweenReports
    highest_sequence : uint32 array, shape (n,)
        As reported; the reporter counts wraps in its own way, so only the lower 16 bits are compared.
    captured_highest : int64 array, shape (n,)
        Highest sequence number of the stream that the capture had shown when the report came, -1 where none.
    half_trips_ms : float array, shape (n,)
        From ``half_trip_ms``, NaN where unknown. [ms]

    References
    ----------
    RFC 3550, A.1 (how far numbers may be apart), A.3 (what the fields mean).
    """
    shares, trips = np.asarray(fraction, np.int64), np.asarray(half_trips_ms, np.float64)
    reported, captured = np.asarray(highest_sequence, np.int64), np.asarray(captured_highest, np.int64)
    apart = (reported - captured + 0x8000) % 0x10000 - 0x8000
    checks = (
        ((captured >= 0) & (np.abs(apart) > MAX_DROPOUT), "its highest sequence number is not of this stream"),
        (between.expected < 0, "its highest sequence number goes back"),
        (between.lost > np.maximum(between.expected, 0), "it counts more packets lost than were expected"),
        ((shares > 0) & (between.lost <= 0), "it gives a fraction lost, and no more packets lost than before"),
        (trips < -SLACK_MS, "its delay since the last sender report is longer than the time since then"),
    )
    found = [""] * len(shares)
    for wrong, clause in reversed(checks):
        for row in np.flatnonzero(wrong):
            found[row] = clause
    return found
