"""Traffic: the loss formula against tables and against its sum, the busy hour by hand."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import poisson

from rtpaudit.nightly import traffic
from tests.published import published_rows

TABLE = published_rows("erlang_b")
HOUR_NS = 3_600_000_000_000
MINUTE_NS = HOUR_NS // 60
TEN = 1_772_445_600_000_000_000
"""a whole hour"""


def digits_of(text: str) -> float:
    """Half a unit of the last printed digit."""
    return 0.5 * 10.0 ** -len(text.partition(".")[2])


@pytest.mark.parametrize("row", TABLE, ids=lambda row: f"{row['channels']} at {row['blocking']}")
def test_channels_carry_what_the_table_says(row: dict[str, str]) -> None:
    channels, blocking, step = int(row["channels"]), float(row["blocking"]), digits_of(row["erlangs"])
    below, above = (float(row["erlangs"]) + side * step for side in (-1, 1))
    assert traffic.erlang_b(below, channels) <= blocking <= traffic.erlang_b(above, channels)
    assert traffic.channels_for(below * 0.999, blocking) <= channels < traffic.channels_for(above * 1.001, blocking)


@given(st.floats(0.01, 300.0), st.integers(1, 400))
def test_the_recursion_is_the_formula(erlangs: float, channels: int) -> None:
    """E(A, N) = (A^N / N!) / sum over k up to N of (A^k / k!), which is a ratio of Poisson probabilities (scipy)."""
    formula = poisson.pmf(channels, erlangs) / poisson.cdf(channels, erlangs)
    assert traffic.erlang_b(erlangs, channels) == pytest.approx(formula, rel=1e-9, abs=1e-300)


def test_the_formula_by_hand() -> None:
    """Two erlangs on three channels: (8/6) / (1 + 2 + 2 + 8/6) = 4/19."""
    assert traffic.erlang_b(2.0, 3) == pytest.approx(4 / 19)
    assert traffic.erlang_b(2.0, 0) == 1.0


@pytest.mark.parametrize("erlangs", [0.0, -1.0, math.nan, 1e12])
def test_no_traffic_takes_no_channels(erlangs: float) -> None:
    assert traffic.channels_for(erlangs) == 0


@pytest.mark.parametrize(
    ("channels", "t1", "common", "e1"), [(23, 1, 1, 1), (24, 1, 2, 1), (25, 2, 2, 1), (30, 2, 2, 1), (31, 2, 2, 2)]
)
def test_lines_hold_24_23_and_30_channels(channels: int, t1: int, common: int, e1: int) -> None:
    assert traffic.lines_for(channels) == traffic.Channels(channels, t1, common, e1)


def times(*spans: tuple[float, float]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Calls by begin and end in minutes after ten."""
    begin, end = (np.array([TEN + round(span[side] * MINUTE_NS) for span in spans], np.int64) for side in (0, 1))
    return begin, end, np.ones(len(spans))


def test_two_calls_of_half_an_hour_are_one_erlang() -> None:
    busy = traffic.busy_hour(*times((0, 30), (10, 40), (200, 210)))
    assert busy is not None
    assert busy.erlangs == pytest.approx(1.0)
    assert (busy.calls, busy.most_at_once) == (2.0, 2.0)
    assert busy.most_at_once_ns == TEN + 10 * MINUTE_NS


def test_a_call_longer_than_the_hour_counts_for_the_hour() -> None:
    busy = traffic.busy_hour(*times((-600, 600)))
    assert busy is not None
    assert busy.erlangs == pytest.approx(1.0)


def test_a_call_that_begins_as_another_ends_takes_its_place() -> None:
    assert traffic.most_at_once(*times((0, 10), (10, 20)))[0] == 1.0


def test_calls_of_a_sample_count_for_those_they_stand_for() -> None:
    begin, end, _ = times((0, 30), (10, 40))
    busy = traffic.busy_hour(begin, end, np.array([20.0, 20.0]))
    assert busy is not None
    assert (busy.erlangs, busy.most_at_once) == (pytest.approx(20.0), 40.0)


def test_a_night_without_calls_has_no_busy_hour() -> None:
    assert traffic.busy_hour(*times()) is None
