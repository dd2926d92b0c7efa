"""Windows of two seconds: against a slow twin, and at their edges."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.metrics.windows import (
    MOST_WINDOWS,
    WINDOW_NS,
    count_missing,
    last_per_window,
    percentile_per_window,
    window_count,
    window_of,
)
from tests.naive import windows as naive

START = 1_700_000_000_000_000_000
RUNS = st.tuples(st.integers(-WINDOW_NS, 9 * WINDOW_NS), st.integers(1, 300), st.integers(0, 3 * WINDOW_NS))


@settings(max_examples=150, deadline=None)
@given(st.lists(RUNS, max_size=8), st.integers(1, 8))
def test_missing_packets_fall_where_a_plain_loop_puts_them(runs, count) -> None:
    at, packets, spacing = ([run[k] for run in runs] for k in range(3))
    at = [START + one for one in at]
    found = count_missing(at, packets, spacing, START, count)
    assert found.tolist() == naive.missing_per_window(at, packets, spacing, START, count)
    assert found.sum() == sum(packets)


@settings(max_examples=150, deadline=None)
@given(
    st.lists(st.tuples(st.integers(-WINDOW_NS, 7 * WINDOW_NS), st.floats(0, 5000)), min_size=1, max_size=80),
    st.integers(1, 7),
)
def test_values_fall_where_a_plain_loop_puts_them(rows, count) -> None:
    time = [START + at for at, _ in rows]
    values = [value for _, value in rows]
    window = window_of(time, START, count)
    assert window.tolist() == [naive.window_of(one, START, count) for one in time]
    wanted = naive.values_per_window(values, time, START, count)
    last = [one[-1] if one else np.nan for one in wanted]
    p95 = [np.percentile(one, 95) if one else np.nan for one in wanted]
    assert last_per_window(np.array(values), window, count) == pytest.approx(last, nan_ok=True)
    assert percentile_per_window(values, window, count) == pytest.approx(p95, abs=2e-6, nan_ok=True)


def test_a_window_begins_with_its_first_nanosecond_and_ends_before_the_next() -> None:
    assert window_of([START, START + WINDOW_NS - 1, START + WINDOW_NS], START, 9).tolist() == [0, 0, 1]
    assert window_count([START], START) == 1
    assert window_count([START, START + WINDOW_NS], START) == 2


def test_a_clock_that_goes_back_ends_in_the_first_window() -> None:
    assert window_of([START, START - 10**18, START + 5 * WINDOW_NS], START, 3).tolist() == [0, 0, 2]


def test_a_mad_clock_makes_no_endless_table() -> None:
    assert window_count([START, 2**62], START) == MOST_WINDOWS


def test_forged_runs_end_soon_and_still_add_up() -> None:
    lost = count_missing([START, START], [1 << 50, 1 << 40], [20_000_000, 2**62], START, 1000)
    assert lost.sum() == (1 << 50) + (1 << 40)
