"""Bursts, gaps and burst ratio: against print and against the definition taken literally."""

import math
import re

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.metrics.bursts import burst_ratio, bursts_and_gaps, loss_runs, runs_in
from tests.naive import bursts as naive
from tests.published import published_rows

ROWS = published_rows("burst_gap_example")
DEFINED = {
    "burst_density": lambda found: found.burst_density_pct / 100,
    "gap_density": lambda found: found.gap_density_pct / 100,
    "burst_duration_mean_ms": lambda found: found.burst_duration_ms,
    "gap_duration_mean_ms": lambda found: found.gap_duration_ms,
}
PATTERNS = st.lists(st.sampled_from([True] * 12 + [False]), min_size=1, max_size=90)


def pattern_of(row) -> list[bool]:
    return [mark == "1" for mark in re.search(r"pattern=([01X]+)", row["inputs"])[1]]


def number_of(row, name) -> int:
    return int(re.search(rf"{name}=(\d+)", row["inputs"])[1])


@pytest.mark.parametrize("row", [r for r in ROWS if r["quantity"] in DEFINED], ids=lambda r: r["id"] + r["quantity"])
def test_printed_patterns_by_the_definition(row) -> None:
    """RFC 3611 4.7.2: its own example, lone losses, either side of Gmin, first and last packets, everything lost."""
    found = bursts_and_gaps(runs_in(pattern_of(row)), number_of(row, "ms_per_packet"), number_of(row, "gmin"))
    assert DEFINED[row["quantity"]](found) == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


@pytest.mark.parametrize("row", [r for r in ROWS if r["quantity"] == "burst_ratio_observed"], ids=lambda r: r["id"])
def test_printed_burst_ratios(row) -> None:
    """ITU-T G.107 (06/2015), 7.5."""
    wanted = pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))
    assert burst_ratio(runs_in(pattern_of(row))) == wanted


def test_the_example_of_the_rfc_reads_as_it_is_printed_there() -> None:
    """RFC 3611 4.7.2: burst duration 120 ms, burst density 0.33, gap density 0.04."""
    pattern = "11110111111111111111111X111X1011110111111111111111111X111111111"
    found = bursts_and_gaps(runs_in([mark == "1" for mark in pattern]), 10.0)
    assert found.burst_duration_ms == 120.0
    assert round(found.burst_density_pct / 100, 2) == 0.33
    assert round(found.gap_density_pct / 100, 2) == 0.04


@settings(max_examples=300, deadline=None)
@given(PATTERNS, st.integers(1, 20))
def test_bursts_are_those_of_the_definition_taken_literally(received, gmin) -> None:
    found = bursts_and_gaps(runs_in(received), 20.0, gmin)
    figures = [found.burst_density_pct, found.burst_duration_ms, found.gap_density_pct, found.gap_duration_ms]
    assert figures == pytest.approx(naive.bursts_and_gaps(received, 20.0, gmin))


@settings(max_examples=200, deadline=None)
@given(st.lists(st.booleans(), min_size=1, max_size=60))
def test_the_burst_ratio_is_that_of_a_plain_loop(received) -> None:
    wanted = naive.burst_ratio(received)
    found = burst_ratio(runs_in(received))
    assert math.isnan(found) if wanted is None else found == pytest.approx(wanted)


@settings(max_examples=100, deadline=None)
@given(st.lists(st.booleans(), min_size=1, max_size=60))
def test_places_say_the_same_as_a_mask(received) -> None:
    by_place, by_mask = loss_runs(np.flatnonzero(received), len(received)), runs_in(received)
    assert by_place.first.tolist() == by_mask.first.tolist()
    assert by_place.length.tolist() == by_mask.length.tolist()
    assert by_mask.lost == received.count(False)


def test_random_loss_has_a_burst_ratio_near_one() -> None:
    received = np.random.default_rng(107).random(200_000) >= 0.05
    assert burst_ratio(runs_in(received)) == pytest.approx(1.0, abs=0.02)


def test_a_stream_without_loss_is_one_gap_and_has_no_burst_ratio() -> None:
    found = bursts_and_gaps(runs_in([True] * 50), 20.0)
    assert (found.burst_density_pct, found.burst_duration_ms) == (0.0, 0.0)
    assert (found.gap_density_pct, found.gap_duration_ms) == (0.0, 1000.0)
    assert math.isnan(burst_ratio(runs_in([True] * 50)))


def test_an_unknown_packet_time_leaves_densities() -> None:
    found = bursts_and_gaps(runs_in([True, False, False, True]), float("nan"))
    assert found.burst_density_pct == 100.0
    assert math.isnan(found.burst_duration_ms)
    assert math.isnan(found.gap_duration_ms)


def test_no_expected_packet_is_refused() -> None:
    with pytest.raises(ValueError, match="at least one expected packet"):
        runs_in([])
