"""Intervals of shares and quantiles against scipy, and by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import binomtest

from rtpaudit.nightly import intervals
from rtpaudit.nightly.bootstrap import difference, replicates


@pytest.mark.parametrize(("hits", "count"), [(0, 10), (1, 10), (5, 10), (10, 10), (3, 1000), (81, 263), (15, 148)])
def test_the_score_interval_is_that_of_scipy(hits: int, count: int) -> None:
    expected = binomtest(hits, count).proportion_ci(method="wilson")
    assert intervals.wilson(hits / count, count) == pytest.approx((expected.low, expected.high), abs=1e-12)


@pytest.mark.parametrize(
    ("hits", "count", "low", "high"),
    [(81, 263, 0.2553, 0.3662), (15, 148, 0.0624, 0.1605), (0, 20, 0.0, 0.1611), (1, 29, 0.0061, 0.1718)],
)
def test_the_score_interval_is_as_printed(hits: int, count: int, low: float, high: float) -> None:
    """R. G. Newcombe (1998), Statistics in Medicine 17, 857: table I, method 3 (score); from memory."""
    assert intervals.wilson(hits / count, count) == pytest.approx((low, high), abs=1.5e-4)


def test_a_share_of_nothing_has_no_interval() -> None:
    assert np.isnan(intervals.wilson(float("nan"), 0.0)).all()


def test_equal_weights_change_nothing() -> None:
    weight = np.full(50, 7.0)
    assert intervals.effective_count(weight) == pytest.approx(50.0)
    values = np.random.default_rng(1).normal(size=50)
    for q in (0.05, 0.5, 0.95):
        assert intervals.quantile(values, weight, q) == np.quantile(values, q, method="inverted_cdf")


@given(st.lists(st.tuples(st.floats(-100, 100), st.integers(1, 5)), min_size=1, max_size=40), st.floats(0.01, 0.99))
def test_a_weight_is_so_many_calls(pairs: list[tuple[float, int]], q: float) -> None:
    """Twin: every call written out as often as its weight says."""
    values = np.array([value for value, _ in pairs])
    weight = np.array([float(times) for _, times in pairs])
    written_out = sorted(value for value, times in pairs for _ in range(times))
    place = next(k for k in range(len(written_out)) if (k + 1) >= q * len(written_out) * (1.0 - 1e-12))
    assert intervals.quantile(values, weight, q) == written_out[place]


def test_the_interval_of_a_median_holds_it_as_often_as_it_says() -> None:
    draw = np.random.default_rng(7)
    held = 0
    for _ in range(1000):
        low, high = intervals.quantile_interval(draw.exponential(size=60), np.ones(60), 0.5)
        held += low <= np.log(2.0) <= high
    assert 0.93 <= held / 1000 <= 0.98


def test_a_sample_of_all_has_no_interval_left() -> None:
    interval = intervals.Interval(5.0, 4.0, 7.0)
    assert intervals.narrowed(interval, 100, 100) == intervals.Interval(5.0, 5.0, 5.0)
    assert intervals.narrowed(interval, 75, 100) == intervals.Interval(5.0, 4.5, 6.0)


@pytest.mark.parametrize("q", [None, 0.5])
def test_replicates_spread_like_those_of_scipy(q: float | None) -> None:
    from scipy.stats import bootstrap

    draw = np.random.default_rng(5)
    values = (draw.random(200) < 0.1).astype(float) if q is None else draw.normal(80.0, 5.0, 200)
    ours = replicates(values, np.ones(200), np.arange(200), q, np.random.default_rng(1), 4000)
    statistic = (lambda x, axis: 100.0 * x.mean(axis=axis)) if q is None else np.median
    theirs = bootstrap((values,), statistic, n_resamples=4000, method="percentile", rng=2, vectorized=True)
    low, high = np.percentile(ours, [2.5, 97.5])
    wide = theirs.confidence_interval.high - theirs.confidence_interval.low
    assert low == pytest.approx(theirs.confidence_interval.low, abs=0.1 * wide)
    assert high == pytest.approx(theirs.confidence_interval.high, abs=0.1 * wide)


def test_calls_of_one_capture_are_drawn_together() -> None:
    """Ten captures of ten like calls each tell no more than ten calls: the spread is larger by the root of ten."""
    values = np.repeat(np.arange(10) < 5, 10).astype(float)
    alone = replicates(values, np.ones(100), np.arange(100), None, np.random.default_rng(1), 2000)
    together = replicates(values, np.ones(100), np.repeat(np.arange(10), 10), None, np.random.default_rng(1), 2000)
    assert together.std() / alone.std() == pytest.approx(10**0.5, rel=0.1)


def test_the_difference_has_the_spread_of_both_sides() -> None:
    draw = np.random.default_rng(3)
    before = draw.normal(10.0, 1.0, 25)
    apart = difference(draw.normal(12.0, 0.5, 4000), before, 12.0, draw)
    spread = np.hypot(0.5, before.std() / 5.0)
    assert apart.value == pytest.approx(12.0 - before.mean())
    assert (apart.high - apart.low) / 2 == pytest.approx(1.96 * spread, rel=0.1)
