"""Rhythm, coincidence and lasting steps, on series so short that they can be counted."""

import numpy as np
import pytest

from rtpaudit.findings.patterns import by_chance, events_of, falling_together, lasting_steps, rhythm


def test_events_begin_anew_after_a_pause() -> None:
    begin, end = np.array([0.0, 0.1, 0.5, 0.52, 2.0]), np.array([0.05, 0.3, 0.51, 0.6, 2.0])
    assert events_of(begin, end, 0.25).tolist() == [0, 0, 0, 0, 1]
    assert events_of(begin, end, 0.19).tolist() == [0, 0, 1, 1, 2]


def test_no_events_make_none() -> None:
    assert events_of(np.empty(0), np.empty(0), 1.0).tolist() == []


@pytest.mark.parametrize("period", [0.8, 5.0, 17.0])
def test_even_events_have_their_period(period) -> None:
    found = rhythm(3.0 + period * np.arange(6))
    assert found is not None
    assert found.period_s == pytest.approx(period)
    assert found.events == 6


def test_a_missed_event_leaves_the_period_alone() -> None:
    found = rhythm(np.array([1.0, 3.0, 5.0, 9.0, 11.0, 13.0]))
    assert found is not None
    assert found.period_s == pytest.approx(2.0)


def test_three_events_are_too_few() -> None:
    assert rhythm(np.array([1.0, 2.0, 3.0])) is None


def test_a_period_below_the_shortest_is_none() -> None:
    assert rhythm(0.4 * np.arange(9), shortest_s=0.5) is None


def test_random_events_have_a_period_in_less_than_one_case_of_a_hundred() -> None:
    draw = np.random.default_rng(11)
    hits = sum(rhythm(np.sort(draw.uniform(0, 30, int(draw.integers(4, 10))))) is not None for _ in range(500))
    assert hits < 5


def test_intervals_that_overlap_or_nearly_do_fall_together() -> None:
    one = np.array([0.0, 1.0, 2.0]), np.array([0.1, 1.1, 2.1])
    other = np.array([0.05, 1.13, 5.0]), np.array([0.06, 1.2, 5.1])
    assert falling_together(one, other, 0.0).tolist() == [True, False, False]
    assert falling_together(one, other, 0.03).tolist() == [True, True, False]


def test_a_long_interval_reaches_over_short_ones() -> None:
    one = np.array([4.0]), np.array([4.1])
    other = np.array([0.0, 1.0]), np.array([9.0, 1.1])
    assert falling_together(one, other, 0.0).tolist() == [True]


def test_chance_is_the_time_that_the_other_covers() -> None:
    one = np.array([0.0, 5.0]), np.array([0.0, 5.0])
    other = np.array([1.0, 6.0]), np.array([2.0, 7.0])
    assert by_chance(one, other, 0.0, (0.0, 10.0)) == pytest.approx(0.2)
    assert by_chance(one, other, 0.5, (0.0, 10.0)) == pytest.approx(0.4)


def test_a_lasting_step_has_place_and_height() -> None:
    (one,) = lasting_steps(np.repeat([3.0, 45.0], 20), 30.0, 10)
    assert (one.at, one.height) == (20, 42.0)


def test_a_step_that_comes_back_and_a_lone_value_are_none() -> None:
    level = np.zeros(60)
    level[20:24] = 50.0
    level[40] = 90.0
    assert lasting_steps(level, 30.0, 10) == []


def test_a_slow_rise_is_no_step() -> None:
    assert lasting_steps(np.linspace(0, 300, 100), 30.0, 10) == []
