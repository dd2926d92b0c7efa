"""All figures of a stream in one call: they agree with the slow twins, and with each other."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.metrics.network import NetworkFigures, network_figures
from tests.metrics.streams import MS, STARTED_NS, Columns, by_numbers, paced, streams
from tests.naive import bursts, loss, timing, windows


def figures_of(one: Columns, packet_time_ms=20.0) -> NetworkFigures:
    return network_figures(
        one.time_ns,
        one.extended,
        one.segment,
        one.duplicate,
        one.media_ticks,
        one.audio,
        one.clock_rate_hz,
        packet_time_ms,
    )


def close(wanted):
    return pytest.approx(wanted, rel=1e-9, abs=1e-5, nan_ok=True)


@settings(max_examples=120, deadline=None)
@given(streams())
def test_counts_and_bursts_are_those_of_the_slow_twins(one) -> None:
    found, plain = figures_of(one), one.lists()
    account = loss.account(plain.extended, plain.segment, plain.duplicate)
    received = loss.mask(plain.extended, plain.segment, plain.duplicate)
    assert found.segments == account["segments"]
    assert found.packets_captured == account["captured"]
    assert found.packets_received == account["received"]
    assert found.packets_expected == account["expected"]
    assert found.packets_lost == account["lost"]
    assert found.loss_pct == pytest.approx(100 * account["lost"] / account["expected"])
    assert found.packets_duplicated == account["duplicated"]
    assert found.packets_reordered == account["reordered"]
    assert found.sequence_gaps == len(account["runs"])
    assert found.longest_gap_packets == max((length for _, _, length in account["runs"]), default=0)
    assert found.burst_ratio == close(bursts.burst_ratio(received) or math.nan)
    assert [
        found.burst_density_pct,
        found.burst_duration_ms,
        found.gap_density_pct,
        found.gap_duration_ms,
    ] == close(bursts.bursts_and_gaps(received, 20.0, 16))


@settings(max_examples=120, deadline=None)
@given(streams())
def test_times_are_those_of_the_slow_twins(one) -> None:
    """These streams are shorter than 30 s, so that no skew is removed."""
    found = figures_of(one)
    heard = one.rows(one.audio & ~one.duplicate).lists()
    columns = heard.time_ns, heard.media_ticks, heard.segment, heard.clock_rate_hz
    jitter, variation = timing.jitter_ms(*columns), timing.delay_variation_ms(*columns)
    assert math.isnan(found.clock_skew_ppm)
    if len(jitter) > 1:
        assert found.jitter_ms == close(sum(jitter[1:]) / len(jitter[1:]))
        assert (found.jitter_max_ms, found.jitter_last_ms) == close((max(jitter), jitter[-1]))
    if variation:
        assert found.pdv_max_ms == close(max(variation))
        ranks = [found.pdv_p50_ms, found.pdv_p95_ms, found.pdv_p99_ms]
        assert ranks == close([timing.percentile(variation, share) for share in (50, 95, 99)])
    count = len(found.windows.from_s)
    started = int(one.time_ns[0])
    last = [part[-1] if part else math.nan for part in windows.values_per_window(jitter, heard.time_ns, started, count)]
    assert found.windows.jitter_ms == close(last)
    parts = windows.values_per_window(variation, heard.time_ns, started, count)
    assert found.windows.pdv_p95_ms == close([timing.percentile(part, 95) if part else math.nan for part in parts])


@settings(max_examples=120, deadline=None)
@given(streams())
def test_windows_and_gaps_add_up_to_the_stream(one) -> None:
    found, plain = figures_of(one), one.lists()
    table = found.windows
    assert table.packets_expected.sum() == found.packets_expected
    assert table.packets_lost.sum() == found.packets_lost == found.gaps.packets_missing.sum()
    assert (table.packets_lost <= table.packets_expected).all()
    received = windows.received_per_window(plain.time_ns, plain.duplicate, plain.time_ns[0], len(table.from_s))
    assert (table.packets_expected - table.packets_lost).tolist() == received
    assert table.from_s.tolist() == [2.0 * k for k in range(len(received))]
    assert np.isnan(table.loss_pct).tolist() == (table.packets_expected == 0).tolist()


def test_a_lost_packet_counts_in_the_window_of_its_media_time() -> None:
    """Packets 90 to 109 are lost, from 1.8 s to 2.2 s: ten before the edge at 2 s, ten from it on."""
    numbers = np.r_[0:90, 110:300]
    table = figures_of(by_numbers(numbers)).windows
    assert table.packets_lost.tolist() == [10, 10, 0]
    assert table.packets_expected.tolist() == [100, 100, 100]
    assert table.loss_pct.tolist() == [10.0, 10.0, 0.0]


def test_an_empty_window_stays() -> None:
    one = by_numbers(np.arange(100))
    one = replace(one, time_ns=one.time_ns + (one.extended >= 50) * 5_000 * MS)
    table = figures_of(one).windows
    assert table.packets_expected.tolist() == [50, 0, 0, 50]
    assert np.isnan([table.loss_pct[1], table.jitter_ms[1], table.pdv_p95_ms[1]]).all()


def test_events_and_copies_are_counted_but_not_timed() -> None:
    one = by_numbers([0, 1, 2, 2, 3, 4], delays_ms=[0, 0, 0, 400, 300, 0])
    one = replace(one, audio=np.array([1, 1, 1, 1, 0, 1], bool))
    found = figures_of(one)
    assert (found.packets_captured, found.packets_received, found.packets_lost) == (6, 5, 0)
    assert (found.jitter_max_ms, found.pdv_max_ms) == (0.0, 0.0)


def test_the_skew_is_removed_from_the_delay_variation_from_30_s_on() -> None:
    short, long = (figures_of(paced(seconds, 500.0, 0.0)) for seconds in (20, 40))
    assert math.isnan(short.clock_skew_ppm)
    assert short.pdv_max_ms == pytest.approx(10.0, abs=0.02)
    assert long.clock_skew_ppm == pytest.approx(500.0, abs=0.01)
    assert long.pdv_max_ms == pytest.approx(0.0, abs=1e-3)
    assert np.nanmax(long.windows.pdv_p95_ms) == pytest.approx(0.0, abs=1e-3)


@pytest.mark.parametrize("packet_time_ms", [20.0, float("nan")])
def test_without_a_clock_rate_everything_but_time_is_told(packet_time_ms) -> None:
    one = replace(by_numbers([0, 1, 3, 4]), clock_rate_hz=np.zeros(4, np.int32))
    found = figures_of(one, packet_time_ms)
    assert (found.packets_lost, found.sequence_gaps) == (1, 1)
    assert np.isnan([found.jitter_ms, found.pdv_p50_ms, found.clock_skew_ppm]).all()
    assert np.isnan(found.windows.jitter_ms).all()
    assert found.windows.packets_lost.sum() == 1


def test_a_lone_packet_is_a_stream() -> None:
    found = figures_of(by_numbers([7]))
    assert (found.packets_expected, found.packets_lost, found.segments) == (1, 0, 1)
    assert math.isnan(found.jitter_ms)
    assert found.pdv_max_ms == 0.0
    assert found.windows.packets_expected.tolist() == [1]


def test_the_beginning_can_be_given() -> None:
    one = by_numbers([0, 2])
    found = network_figures(*one.__dict__.values(), 20.0, started_ns=STARTED_NS - 3000 * MS)
    assert found.gaps.after_s.tolist() == [3.0]
    assert found.windows.packets_expected.tolist() == [0, 3]


def test_a_forged_jump_of_the_numbers_costs_little() -> None:
    one = by_numbers([0, 1, 2])
    found = figures_of(replace(one, extended=np.array([0, 1, 1 << 50])))
    assert found.windows.packets_lost.sum() == found.packets_lost == (1 << 50) - 2


WIDE = st.integers(-(2**61), 2**61)
FORGED = st.tuples(WIDE, st.integers(0, 2**44), st.integers(0, 3), WIDE, st.booleans(), st.sampled_from([8000, 0, -1]))


@settings(max_examples=100, deadline=None)
@given(
    st.lists(FORGED, min_size=1, max_size=30, unique_by=lambda row: row[1:3]), st.sampled_from([20.0, 0.0, math.nan])
)
def test_columns_that_no_sender_ever_sent_still_add_up(rows, packet_time_ms) -> None:
    time_ns, extended, segment, ticks, audio, rate = map(list, zip(*rows, strict=True))
    found = network_figures(time_ns, extended, segment, [False] * len(rows), ticks, audio, rate, packet_time_ms)
    assert found.windows.packets_lost.sum() == found.packets_lost
    assert found.windows.packets_expected.sum() == found.packets_expected


def test_one_column_too_short_is_refused() -> None:
    one = by_numbers([0, 1, 2])
    with pytest.raises(ValueError, match="one length"):
        figures_of(replace(one, media_ticks=one.media_ticks[:2]))
