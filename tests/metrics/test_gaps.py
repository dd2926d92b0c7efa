"""Begin and duration of what is missing, on streams so small that both can be counted."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings

from rtpaudit.metrics.gaps import Gaps, date_gaps, spacing_ns
from rtpaudit.metrics.loss import in_sequence, missing_runs
from tests.metrics.streams import MS, STARTED_NS, Columns, by_numbers, streams


def gaps_of(one: Columns, packet_time_ms=20.0) -> Gaps:
    return both_of(one, packet_time_ms)[0]


def both_of(one: Columns, packet_time_ms=20.0):
    sequence = in_sequence(one.extended, one.segment, one.duplicate)
    runs = missing_runs(sequence, one.extended, one.segment)
    gaps = date_gaps(
        runs, sequence, one.time_ns, one.media_ticks, one.audio, one.clock_rate_hz, packet_time_ms, STARTED_NS
    )
    return gaps, runs


def test_a_run_begins_with_the_arrival_of_the_packet_before_it() -> None:
    found = gaps_of(by_numbers([0, 1, 2, 6, 7, 9], delays_ms=[0, 5, 1, 0, 0, 0]))
    assert found.first_missing.tolist() == [3, 8]
    assert found.packets_missing.tolist() == [3, 1]
    assert found.at_ns.tolist() == [STARTED_NS + 41 * MS, STARTED_NS + 140 * MS]
    assert found.after_s.tolist() == [0.041, 0.14]
    assert found.duration_ms.tolist() == [60.0, 20.0]


def test_the_packet_before_is_the_one_before_in_sequence_not_in_arrival() -> None:
    one = by_numbers([0, 2, 1, 4])
    one = replace(one, time_ns=STARTED_NS + np.array([0, 40, 45, 80]) * MS)
    assert gaps_of(one).at_ns.tolist() == [STARTED_NS + 40 * MS]


def test_a_pause_beside_the_lost_packets_is_not_missing_media() -> None:
    """Three packets are lost and silence was suppressed for 2 s: what is missing is 60 ms, not 2060."""
    one = by_numbers([0, 1, 2, 6, 7])
    one = replace(one, media_ticks=one.media_ticks + np.array([0, 0, 0, 16000, 16000]))
    assert gaps_of(one).duration_ms.tolist() == [60.0]


def test_timestamps_tell_the_duration_where_they_differ_by_less_than_a_packet() -> None:
    one = by_numbers([0, 1, 2, 6, 7])
    one = replace(one, media_ticks=one.media_ticks + np.array([0, 0, 0, 80, 80]))
    assert gaps_of(one).duration_ms.tolist() == [70.0]


def test_packets_lost_within_a_telephone_event_last_as_long_as_others() -> None:
    """All packets of one event bear one timestamp (RFC 4733 2.2.4), so that the distance says nothing."""
    one = by_numbers([0, 1, 2, 3, 5, 6])
    one = replace(one, media_ticks=np.array([0, 160, 320, 480, 480, 480]), audio=np.arange(6) < 3)
    assert gaps_of(one).duration_ms.tolist() == [20.0]


def test_a_change_of_packet_time_in_mid_stream_is_followed() -> None:
    one = by_numbers([0, 1, 2, 3, 4, 5, 6, 9])
    one = replace(one, media_ticks=np.array([0, 160, 320, 480, 800, 1120, 1440, 2400]))
    assert gaps_of(one).duration_ms.tolist() == [80.0]


def test_two_clock_rates_have_no_common_distance() -> None:
    one = by_numbers([0, 1, 3, 4])
    one = replace(one, clock_rate_hz=np.array([8000, 8000, 16000, 16000], np.int32))
    assert gaps_of(one).duration_ms.tolist() == [20.0]


def test_without_a_clock_rate_the_packet_time_stands_and_without_both_nothing() -> None:
    one = replace(by_numbers([0, 1, 4]), clock_rate_hz=np.zeros(3, np.int32))
    assert gaps_of(one).duration_ms.tolist() == [40.0]
    assert np.isnan(gaps_of(one, float("nan")).duration_ms).all()


def test_without_a_packet_time_the_distance_is_shared_out_evenly() -> None:
    assert gaps_of(by_numbers([0, 4, 5]), float("nan")).duration_ms.tolist() == [60.0]


def test_missing_packets_lie_a_packet_time_apart_or_evenly_where_that_is_unknown() -> None:
    one = by_numbers([0, 1, 4])
    gaps, runs = both_of(one)
    assert spacing_ns(gaps, runs, one.time_ns).tolist() == [20 * MS]
    unknown = replace(by_numbers([0, 1, 4], delays_ms=[0, 0, 6]), clock_rate_hz=np.zeros(3, np.int32))
    gaps, runs = both_of(unknown, float("nan"))
    assert spacing_ns(gaps, runs, unknown.time_ns).tolist() == [22 * MS]


def test_a_clock_that_goes_backwards_makes_no_negative_spacing() -> None:
    unknown = replace(by_numbers([0, 1, 4], delays_ms=[0, 500, 0]), clock_rate_hz=np.zeros(3, np.int32))
    gaps, runs = both_of(unknown, float("nan"))
    assert spacing_ns(gaps, runs, unknown.time_ns).tolist() == [0]


def test_a_forged_distance_does_not_carry_missing_packets_far_behind_the_next_arrival() -> None:
    one = replace(by_numbers([0, 1, 4]), media_ticks=np.array([0, 1_600_000, 6_400_000]))
    gaps, runs = both_of(one, packet_time_ms=200_000.0)
    assert gaps.duration_ms.tolist() == [400_000.0]
    assert spacing_ns(gaps, runs, one.time_ns).tolist() == [(60 + 2000) * MS // 2]


@settings(max_examples=100, deadline=None)
@given(streams())
def test_durations_follow_the_timestamps_or_the_packet_count(one) -> None:
    gaps, runs = both_of(one)
    for row in range(len(runs.packets)):
        before, after = int(runs.before[row]), int(runs.after[row])
        by_count = 20.0 * int(runs.packets[row])
        wanted = by_count
        if one.clock_rate_hz[before] == one.clock_rate_hz[after]:
            rate = int(one.clock_rate_hz[before])
            distance_ms = (int(one.media_ticks[after]) - int(one.media_ticks[before])) * 1000 / rate
            if abs(distance_ms - 20.0 - by_count) <= 20.0:
                wanted = distance_ms - 20.0
        assert gaps.duration_ms[row] == pytest.approx(wanted)
        assert gaps.at_ns[row] == one.time_ns[before]
