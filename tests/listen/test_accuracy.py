import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from rtpaudit.listen.accuracy import accuracy, first_order

N = float("nan")


def test_everything_is_counted_by_hand() -> None:
    # Opinion is 1 + 0.5 x prediction but for the errors +0.2, -0.4, +0.2, which least squares leave as they are.
    predicted = np.array([2.0, 3.0, 4.0])
    opinion = np.array([2.2, 2.1, 3.2])
    found = accuracy(predicted, opinion, np.array([0.3, 0.3, 0.1]))
    assert found.mapping is not None
    assert (found.mapping.offset, found.mapping.slope) == pytest.approx((1.0, 0.5))
    assert found.rmse == pytest.approx(math.sqrt((0.2**2 + 0.9**2 + 0.8**2) / 2))
    assert found.rmse_mapped == pytest.approx(math.sqrt((0.2**2 + 0.4**2 + 0.2**2) / 1))
    assert found.rmse_epsilon == pytest.approx(math.sqrt((0.0 + 0.1**2 + 0.1**2) / 1))
    assert found.outlier_ratio == pytest.approx(2 / 3)
    assert found.clips == 3


def test_what_a_mapping_explains_is_no_error_after_it() -> None:
    predicted = np.array([1.0, 2.0, 3.0, 4.0, 4.4])
    found = accuracy(predicted, 0.7 * predicted + 0.9, np.full(5, 0.1))
    assert found.correlation == pytest.approx(1.0)
    assert found.rmse > 0.2
    assert found.rmse_mapped == pytest.approx(0.0, abs=1e-12)
    assert found.rmse_epsilon == 0.0


def test_clips_without_prediction_or_opinion_are_left_out() -> None:
    found = accuracy(np.array([1.0, 2.0, N, 4.0, 3.0]), np.array([1.0, 2.0, 3.0, N, 3.0]), np.full(5, 0.1))
    assert found.clips == 3
    assert found.rmse == 0.0


def test_a_mapping_has_to_rise() -> None:
    found = accuracy(np.array([1.0, 2.0, 3.0, 4.0]), np.array([4.0, 3.0, 2.0, 1.0]), np.full(4, 0.1))
    assert found.mapping is None
    assert math.isnan(found.rmse_mapped)
    assert math.isnan(found.rmse_epsilon)
    assert found.correlation == pytest.approx(-1.0)


@pytest.mark.parametrize("count", [0, 1, 2])
def test_few_clips_say_little(count: int) -> None:
    found = accuracy(np.arange(1.0, 1.0 + count), np.arange(1.0, 1.0 + count), np.zeros(count))
    assert found.mapping is None
    assert math.isnan(found.rmse_mapped)
    assert math.isnan(found.correlation_low)


def test_intervals_that_are_not_known_forgive_nothing_and_count_for_nothing() -> None:
    predicted, opinion = np.array([1.0, 2.0, 3.0, 4.0]), np.array([1.5, 1.5, 3.5, 3.5])
    known = accuracy(predicted, opinion, np.array([0.1, 0.1, 0.1, N]))
    assert known.outlier_ratio == pytest.approx(1.0)
    none = accuracy(predicted, opinion, np.full(4, N))
    assert math.isnan(none.rmse_epsilon)
    assert math.isnan(none.outlier_ratio)


@settings(deadline=None, max_examples=60)
@given(st.lists(st.tuples(st.floats(1, 4.5), st.floats(1, 5)), min_size=5, max_size=30, unique_by=lambda one: one[0]))
def test_correlation_interval_and_mapping_are_those_of_scipy(pairs: list[tuple[float, float]]) -> None:
    x, y = np.array(pairs).T
    if np.std(x) < 1e-3 or np.std(y) < 1e-3:
        return
    expected = stats.pearsonr(x, y)
    found = accuracy(x, y, np.full(len(x), 0.2))
    assert found.correlation == pytest.approx(expected.statistic, abs=1e-9)
    if abs(expected.statistic) < 0.999999:
        interval = expected.confidence_interval(0.95)
        assert (found.correlation_low, found.correlation_high) == pytest.approx(tuple(interval), abs=1e-5)
    line = stats.linregress(x, y)
    mapping = first_order(x, y)
    if line.slope > 1e-9:
        assert mapping is not None
        assert (mapping.offset, mapping.slope) == pytest.approx((line.intercept, line.slope), abs=1e-7)
