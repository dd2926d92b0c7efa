"""Steps and changes against scipy, and a year of nights in which nothing changes."""

import numpy as np
import pytest
from scipy import stats

from rtpaudit.nightly import trends
from rtpaudit.nightly.compare import TREND_NIGHTS, compare
from rtpaudit.nightly.groups import ALL
from tests.nightly.years import FIRST, MEASURED, night

MOST_FALSE_ALARMS = 5


def test_the_chance_of_a_night_is_that_of_its_prediction_interval() -> None:
    """scipy: the point whose two-sided chance is 5 % lies t(0.975, m - 1) spreads times sqrt(1 + 1 / m) away."""
    before = np.random.default_rng(1).normal(80.0, 2.0, 28)
    for chance in (0.05, 0.001):
        reach = stats.t.ppf(1.0 - chance / 2.0, 27) * before.std(ddof=1) * np.sqrt(1.0 + 1.0 / 28.0)
        assert trends.prediction_p(before.mean() + reach, before, 0.0) == pytest.approx(chance)
        assert trends.prediction_p(before.mean() - reach, before, 0.0) == pytest.approx(chance)


def test_nights_that_do_not_differ_at_all_are_judged_by_the_calls_in_them() -> None:
    before = np.full(28, 80.0)
    assert trends.prediction_p(80.0, before, 0.0) == 1.0
    assert trends.prediction_p(81.0, before, 1.0) > 0.3
    assert trends.prediction_p(99.0, before, 1.0) < 1e-10


def test_holm_is_holm_by_adjusted_probabilities() -> None:
    """Twin: the k-th smallest p times the number of those not smaller, at least as much as those before it."""
    draw = np.random.default_rng(2)
    for _ in range(50):
        p = np.concatenate([draw.random(20), draw.random(5) * 1e-3])
        order = np.argsort(p)
        adjusted, highest = np.empty(25), 0.0
        for rank, place in enumerate(order):
            highest = max(highest, (25 - rank) * p[place])
            adjusted[place] = highest
        assert trends.holm(p.tolist(), 0.05) == (adjusted <= 0.05).tolist()


def test_holm_by_hand() -> None:
    """Four at 5 %: 0.01 < 0.05 / 4 and 0.015 < 0.05 / 3, but 0.03 > 0.05 / 2, with which all behind it fall."""
    assert trends.holm([0.03, 0.01, 0.9, 0.015], 0.05) == [False, True, False, True]
    assert trends.holm([], 0.05) == []


def test_a_steadied_share_spreads_alike_at_every_level() -> None:
    """Anscombe: variance about 1 / (4 n + 2)."""
    draw = np.random.default_rng(3)
    for p in (0.05, 0.2, 0.5, 0.9):
        steady = trends.steadied_share(draw.binomial(400, p, 20_000) / 400.0, np.full(20_000, 400.0))
        assert steady.var() * (4 * 400 + 2) == pytest.approx(1.0, rel=0.05)


def test_the_largest_step_is_the_largest_t_of_scipy() -> None:
    draw = np.random.default_rng(4)
    for _ in range(30):
        values = draw.normal(size=25)
        values[draw.integers(5, 20) :] += draw.normal(0.0, 2.0)
        step = trends.largest_step(values, np.zeros(25))
        places = range(trends.LEAST_SIDE, 25 - trends.LEAST_SIDE + 1)
        each = {k: stats.ttest_ind(values[:k], values[k:]) for k in places}
        best = max(each, key=lambda k: abs(each[k].statistic))
        assert step is not None
        assert step.place == best
        assert step.p == pytest.approx(min(len(each) * each[best].pvalue, 1.0))


def test_the_bound_on_chance_is_kept() -> None:
    """In series without a step no more than 5 % show one at 5 %."""
    draw = np.random.default_rng(5)
    found = sum(len(trends.steps(draw.normal(size=40), np.zeros(40), 0.05)) > 0 for _ in range(1000))
    assert found <= 50


def test_two_steps_are_found_where_they_are() -> None:
    values = np.concatenate([np.full(20, 1.0), np.full(20, 5.0), np.full(20, 3.0)])
    values += np.random.default_rng(6).normal(0.0, 0.3, 60)
    found = trends.steps(values, np.zeros(60), 0.001)
    assert [one.place for one in found] == [20, 40]
    assert [round(one.before) for one in found] == [1, 5]
    assert [round(one.after) for one in found] == [5, 3]


@pytest.mark.parametrize("count", range(5))
def test_a_few_nights_show_no_step(count: int) -> None:
    assert trends.largest_step(np.arange(count, dtype=float), np.zeros(count)) is None


def alarms(year: list, from_night: int = 1) -> list[tuple[int, str]]:
    """What the page would have spoken of, by night."""
    return [
        (k, f"{one.group.name}: {one.measure.name}")
        for k in range(from_night, len(year))
        for one in compare(year[k], year[max(0, k - TREND_NIGHTS) : k], MEASURED)
        if one.alarm or one.step_is_new
    ]


def test_a_year_of_unchanged_nights_gives_five_false_alarms_at_most() -> None:
    """Over all measures of all calls, three routes and two codecs together; see benchmarks/nightly.py for more."""
    draw = np.random.default_rng(11)
    false = alarms([night(k, draw) for k in range(365)])
    assert len(false) <= MOST_FALSE_ALARMS, false


def test_a_drop_of_five_points_is_spoken_of_within_two_nights() -> None:
    for seed in range(5):
        draw = np.random.default_rng(seed)
        nights = [night(k, draw, worse_by_r=5.0 if k >= 40 else 0.0) for k in range(43)]
        spoken = [(k, what) for k, what in alarms(nights, 40) if what.endswith(("r_median", "r_p5", "medium_pct"))]
        assert spoken
        assert spoken[0][0] <= 41


def test_a_step_is_new_once_and_says_since_when() -> None:
    draw = np.random.default_rng(9)
    nights = [night(k, draw, worse_by_r=5.0 if k >= 40 else 0.0) for k in range(50)]
    new, since = [], set()
    for k in range(40, 50):
        for one in compare(nights[k], nights[:k], MEASURED):
            if (one.group.dimension, one.measure.name) == (ALL, "r_median") and one.step:
                since.add((one.step - FIRST).days)
                new += [k] if one.step_is_new else []
    assert len(new) == 1
    assert since <= {39, 40, 41}


def test_few_calls_and_few_nights_give_no_alarm() -> None:
    draw = np.random.default_rng(1)
    few_calls = [night(k, draw, calls=20, worse_by_r=30.0 if k == 20 else 0.0) for k in range(21)]
    assert not alarms(few_calls, 20)
    assert all(one.few for one in compare(few_calls[20], few_calls[:20], MEASURED))
    few_nights = [night(k, draw, worse_by_r=30.0 if k == 5 else 0.0) for k in range(6)]
    assert not alarms(few_nights, 5)
