import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from rtpaudit.listen.opinion import correlation_with_others, krippendorff_alpha, opinions, pearson
from tests.naive import listening as naive
from tests.published.agreement import KRIPPENDORFF_2011, KRIPPENDORFF_2011_ORDINAL, STUDENT_T_95

N = float("nan")
MATRICES = st.integers(1, 6).flatmap(
    lambda clips: st.lists(
        st.lists(st.sampled_from([1.0, 2.0, 3.0, 4.0, 5.0, N]), min_size=clips, max_size=clips), min_size=1, max_size=7
    )
)


def test_opinion_is_the_mean_of_the_votes() -> None:
    found = opinions(np.array([[5.0, 1.0, N], [4.0, N, N], [3.0, N, N]]))
    assert found.votes.tolist() == [3, 1, 0]
    assert found.mean[0] == 4.0
    assert found.mean[1] == 1.0
    assert math.isnan(found.mean[2])
    assert found.deviation[0] == 1.0
    assert np.isnan(found.deviation[1:]).all()


@pytest.mark.parametrize("freedom", STUDENT_T_95)
def test_the_interval_is_that_of_student(freedom: int) -> None:
    votes = np.where(np.arange(freedom + 1) % 2, 4.0, 2.0)
    found = opinions(votes[:, None])
    expected = STUDENT_T_95[freedom] * np.std(votes, ddof=1) / math.sqrt(freedom + 1)
    assert found.half_width[0] == pytest.approx(expected, rel=2e-4)
    assert found.high[0] - found.mean[0] == pytest.approx(found.mean[0] - found.low[0])


def test_the_interval_is_that_of_scipy() -> None:
    votes = np.array([1.0, 2.0, 2.0, 4.0, 5.0, 3.0, 3.0])
    found = opinions(votes[:, None])
    low, high = stats.t.interval(0.95, len(votes) - 1, votes.mean(), stats.sem(votes))
    assert (found.low[0], found.high[0]) == pytest.approx((low, high))


def test_votes_that_all_agree_have_no_interval_to_speak_of() -> None:
    assert opinions(np.full((5, 1), 3.0)).half_width[0] == 0.0


def test_alpha_is_that_of_the_published_example() -> None:
    assert krippendorff_alpha(np.array(KRIPPENDORFF_2011)) == pytest.approx(KRIPPENDORFF_2011_ORDINAL, abs=5e-4)


@settings(deadline=None, max_examples=60)
@given(MATRICES)
def test_alpha_is_that_of_its_definition(rows: list[list[float]]) -> None:
    assert krippendorff_alpha(np.array(rows)) == pytest.approx(naive.krippendorff_alpha(rows), abs=1e-9, nan_ok=True)


def test_full_agreement_is_1_and_contradiction_below_0() -> None:
    assert krippendorff_alpha(np.array([[1.0, 3.0, 5.0], [1.0, 3.0, 5.0]])) == pytest.approx(1.0)
    assert krippendorff_alpha(np.array([[1.0, 5.0], [5.0, 1.0]])) < 0.0


def test_without_difference_or_company_there_is_no_alpha() -> None:
    assert math.isnan(krippendorff_alpha(np.full((3, 4), 4.0)))
    assert math.isnan(krippendorff_alpha(np.array([[1.0, 2.0, 3.0]])))
    assert math.isnan(krippendorff_alpha(np.full((2, 2), N)))


def test_a_listener_who_turned_the_scale_round_stands_out() -> None:
    matrix = np.array([[1.0, 2.0, 4.0, 5.0], [1.0, 3.0, 4.0, 4.0], [2.0, 2.0, 5.0, 5.0], [5.0, 4.0, 2.0, 1.0]])
    found = correlation_with_others(matrix)
    assert found[3] < -0.9
    assert (found[:3] > 0.5).all()


def test_of_a_lone_listener_nothing_is_said() -> None:
    assert np.isnan(correlation_with_others(np.array([[1.0, 2.0, 3.0]]))).all()


@settings(deadline=None, max_examples=60)
@given(st.lists(st.tuples(st.floats(1, 5), st.floats(1, 5)), min_size=3, max_size=20))
def test_correlation_is_that_of_scipy(pairs: list[tuple[float, float]]) -> None:
    x, y = np.array(pairs).T
    if np.ptp(x) > 1e-3 and np.ptp(y) > 1e-3:
        assert pearson(x, y) == pytest.approx(stats.pearsonr(x, y).statistic, abs=1e-9)
    elif np.ptp(x) == 0.0 and x[0] == round(x[0]):
        assert math.isnan(pearson(x, y))
