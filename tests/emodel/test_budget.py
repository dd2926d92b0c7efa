from dataclasses import fields
from itertools import permutations
from math import fsum

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.emodel.budget import STEPS, Budget, blended, budget
from rtpaudit.emodel.g107 import rating
from rtpaudit.planning import PlanningValues

CALLS = st.fixed_dictionaries(
    {
        "Ta": st.floats(0, 2000),
        "Ie": st.floats(0, 50),
        "Bpl": st.floats(1, 40),
        "Ppl": st.floats(0, 100),
        "BurstR": st.floats(0.1, 100),
        "TELR": st.floats(5, 70),
    }
)


def points(steps: Budget) -> dict[str, float]:
    return {name: float(step) for name, step in steps.steps()}


@settings(max_examples=300, deadline=None)
@given(CALLS, st.integers(0, 100_000), st.integers(0, 100_000), st.randoms(use_true_random=False))
def test_the_steps_add_up_to_the_rating_in_any_order(call, lost, discarded, order) -> None:
    parts = rating(PlanningValues(A=5.0), **call)
    steps = [float(step) for _, step in budget(parts, lost, discarded).steps()]
    assert fsum(steps) == parts.R
    assert sum(steps) == parts.R
    order.shuffle(steps)
    assert sum(steps) == parts.R


def test_loss_and_discards_share_what_they_cost_in_proportion() -> None:
    parts = rating(Ie=11.0, Bpl=19.0, Ppl=4.0)
    told = points(budget(parts, lost=30, discarded=10))
    cost = float(parts.Ie_eff) - 11.0
    assert told["loss"] == pytest.approx(-0.75 * cost, abs=1e-8)
    assert told["discards"] == pytest.approx(-0.25 * cost, abs=1e-8)
    assert told["Ie"] == -11.0


def test_a_call_that_lost_nothing_has_no_step_for_it_and_no_negative_zero() -> None:
    told = budget(rating(Ta=60.0))
    assert str(float(told.loss)) == str(float(told.discards)) == str(float(told.Ie)) == "0.0"


def test_a_loss_that_was_planned_counts_as_loss() -> None:
    parts = rating(PlanningValues(Ppl=3.0))
    told = points(budget(parts))
    assert told["loss"] == pytest.approx(-float(parts.Ie_eff))
    assert told["discards"] == 0.0


def test_the_steps_come_in_the_order_in_which_they_are_told() -> None:
    told = budget(rating(Ta=250.0, Ppl=2.0), lost=3)
    assert [name for name, _ in told.steps()] == list(STEPS)
    assert [one.name for one in fields(Budget)] == [*STEPS, "R"]
    assert float(told.Ro) > 0 > float(told.Idd)


def test_a_budget_of_windows_has_a_step_for_each() -> None:
    told = budget(rating(Ta=60.0, Ppl=np.array([0.0, 5.0, 5.0])), lost=[0, 5, 0], discarded=[0, 0, 5])
    assert told.R.shape == told.Ro.shape == (3,)
    assert (told.loss < 0).tolist() == [False, True, False]
    assert (told.discards < 0).tolist() == [False, False, True]


def test_streams_of_one_direction_blend_by_weight_and_still_add_up() -> None:
    good, bad = budget(rating(Ta=60.0)), budget(rating(Ta=60.0, Ppl=10.0), lost=10)
    mixed = blended([good, bad], [300, 100])
    assert mixed.R == pytest.approx(0.75 * float(good.R) + 0.25 * float(bad.R), abs=1e-8)
    for some in list(permutations(points(mixed).values()))[:50]:
        assert sum(some) == mixed.R


@pytest.mark.parametrize("weights", [[], [1.0, 2.0], [0.0]])
def test_a_blend_of_nothing_is_refused(weights) -> None:
    with pytest.raises(ValueError, match="at least one budget"):
        blended([budget(rating())], weights)
