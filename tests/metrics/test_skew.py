"""Skew of the sender's clock: known skews under jitter, steps, queues and glitches; its line against a slow twin."""

import math
import tracemalloc
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.metrics.delay import Delays, delays
from rtpaudit.metrics.skew import Skew, _supporting_slope, clock_skew
from tests.metrics.streams import MS, Columns, paced
from tests.naive import timing as naive
from tests.published import published_rows

SKEWS_PPM = [0.0, 20.0, -20.0, 100.0, -100.0]
PACKETS_A_SECOND = 50


def skew_of(one: Columns) -> Skew:
    return clock_skew(delays(one.time_ns, one.media_ticks, one.segment, one.clock_rate_hz))


def exponential(seconds, mean_ms, seed=0) -> np.ndarray:
    return np.random.default_rng(seed).exponential(mean_ms, seconds * PACKETS_A_SECOND)


def after(one: Columns, share: float, added_ms: float) -> Columns:
    """All arrivals from there on so much later: another route, or a capture clock that was set."""
    late = np.arange(len(one.time_ns)) >= share * len(one.time_ns)
    return replace(one, time_ns=one.time_ns + late * round(added_ms * MS))


@pytest.mark.parametrize("row", [r for r in published_rows("clock_drift") if "DRIFT" in r["id"]], ids=lambda r: r["id"])
def test_a_printed_drift_over_an_hour(row) -> None:
    """So many milliseconds in an hour: a fast sender's packets come ever earlier than their timestamps say."""
    n = 3600 * PACKETS_A_SECOND // 10
    time_ns = np.arange(n) * 200 * MS - np.rint(np.arange(n) / n * float(row["expected"]) * MS).astype(np.int64)
    found = clock_skew(delays(time_ns, np.arange(n) * 1600, np.zeros(n), 8000))
    assert found.ppm == pytest.approx(float(row["inputs"].removeprefix("offset_ppm=")), abs=0.05)


@pytest.mark.parametrize("skew_ppm", SKEWS_PPM)
@pytest.mark.parametrize(("seconds", "within_ppm"), [(32, 6.0), (60, 2.0), (180, 0.3)])
def test_a_known_skew_under_exponential_jitter_of_10_ms(skew_ppm, seconds, within_ppm) -> None:
    found = skew_of(paced(seconds, skew_ppm, exponential(seconds, 10.0)))
    assert found.ppm == pytest.approx(skew_ppm, abs=within_ppm)
    assert found.error_ppm < 15.0


@pytest.mark.parametrize("skew_ppm", SKEWS_PPM)
def test_a_known_skew_under_normal_jitter_of_10_ms_deviation(skew_ppm) -> None:
    """Hardly any packet meets the smallest delay, so that a lower envelope alone would be off by tens of ppm."""
    delay_ms = np.abs(np.random.default_rng(3).normal(40.0, 10.0, 180 * PACKETS_A_SECOND))
    found = skew_of(paced(180, skew_ppm, delay_ms))
    assert abs(found.ppm - skew_ppm) < min(8.0, 4 * found.error_ppm)


@pytest.mark.parametrize("skew_ppm", [0.0, 100.0])
@pytest.mark.parametrize("steps", [[(0.4, 10.0)], [(0.6, -10.0)], [(0.5, 2.0)], [(0.3, 8.0), (0.7, 15.0)]])
def test_another_route_in_mid_call_is_no_skew(skew_ppm, steps) -> None:
    one = paced(180, skew_ppm, exponential(180, 2.0))
    for share, added_ms in steps:
        one = after(one, share, added_ms)
    assert skew_of(one).ppm == pytest.approx(skew_ppm, abs=0.5)


@pytest.mark.parametrize("set_ms", [1500.0, -3000.0, 3_600_000.0])
def test_a_capture_clock_that_is_set_is_no_skew(set_ms) -> None:
    one = after(paced(120, 20.0, exponential(120, 2.0)), 0.8, set_ms)
    assert skew_of(one).ppm == pytest.approx(20.0, abs=0.5)


def test_queues_that_come_and_go_are_no_skew() -> None:
    at_s = np.arange(180 * PACKETS_A_SECOND) / PACKETS_A_SECOND
    queue_ms = sum(40.0 * np.clip(1 - np.abs(at_s - peak) / 5, 0, 1) for peak in (20, 31, 120, 170))
    found = skew_of(paced(180, -20.0, exponential(180, 2.0) + queue_ms))
    assert found.ppm == pytest.approx(-20.0, abs=0.5)


def test_one_packet_far_too_early_tilts_nothing() -> None:
    one = paced(180, 20.0, exponential(180, 2.0))
    time_ns = one.time_ns.copy()
    time_ns[2000] -= 50 * MS
    assert skew_of(replace(one, time_ns=time_ns)).ppm == pytest.approx(20.0, abs=0.5)


def test_two_segments_share_one_clock() -> None:
    one = paced(80, 50.0, exponential(80, 2.0))
    late = np.arange(len(one.time_ns)) >= 2000
    one = replace(one, segment=late.astype(np.int32), media_ticks=one.media_ticks + late * 123_456_789)
    assert skew_of(one).ppm == pytest.approx(50.0, abs=1.5)


def test_below_30_seconds_of_audio_there_is_no_skew() -> None:
    assert math.isnan(skew_of(paced(29, 20.0, 0.0)).ppm)
    assert skew_of(paced(30, 20.0, 0.0)).ppm == pytest.approx(20.0, abs=0.1)
    assert math.isnan(skew_of(paced(60, 20.0, 0.0).rows(slice(0, 3))).ppm)


def test_an_hour_on_the_capture_clock_alone_is_no_30_seconds_of_audio() -> None:
    assert math.isnan(skew_of(after(paced(10, 0.0, 0.0), 0.5, 3_600_000.0)).ppm)


def test_a_capture_that_stands_still_gives_no_number() -> None:
    one = paced(60, 0.0, 0.0)
    assert math.isnan(skew_of(replace(one, time_ns=np.full_like(one.time_ns, 5))).ppm)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.tuples(st.integers(1, 40), st.floats(0, 50)), min_size=3, max_size=25))
def test_the_line_under_all_delays_is_that_of_a_search_over_all_pairs(steps) -> None:
    at = np.cumsum([step for step, _ in steps]).astype(float) * 100
    low = np.array([level for _, level in steps])
    weight = np.arange(1.0, len(steps) + 1)
    piece = np.zeros(len(steps), np.int64)
    found = _supporting_slope(at, low, weight, at, piece)
    wanted = naive.line_under_all(at.tolist(), low.tolist(), weight.tolist(), at.tolist())
    if abs(wanted) < 0.1:
        distance = [
            float((weight * (low - slope * at)).sum() - weight.sum() * (low - slope * at).min())
            for slope in (found, wanted)
        ]
        assert distance[0] == pytest.approx(distance[1], rel=1e-6, abs=1e-6)


def test_a_slope_that_no_clock_has_is_no_skew():
    """A queue that grows by 100 ms in every second of a minute is 100,000 ppm of slope, and says nothing of a clock."""
    at_ms = np.arange(3000) * 22.0
    growing = Delays(elapsed_ms=at_ms, delay_ms=at_ms - np.arange(3000) * 20.0, timeline=None)
    assert np.isnan(clock_skew(growing).ppm)


def test_thousands_of_restarts_cost_no_more_memory_than_their_packets():
    n = 20_000
    tracemalloc.start()
    found = clock_skew(delays(np.arange(n) * 20_000_000, np.arange(n) * 160, np.arange(n) // 4, 8000))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert np.isnan(found.ppm)
    assert peak < 100 * n
