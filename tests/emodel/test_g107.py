"""The rating against print, against a slow twin, and at its edges."""

from dataclasses import fields

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.emodel.g107 import Parts, delay_impairment, effective_equipment_impairment, mos_from_r, rating
from rtpaudit.planning import PARAMETERS, PlanningValues
from tests.naive import emodel as naive
from tests.published import published_rows

CHECKPOINTS = published_rows("emodel_checkpoints")
RATED = {"R", "No", "Ro", "Iolr", "Ist", "Iq", "Is", "Idle", "Idd"}
PARTS = [one.name for one in fields(Parts)]


def inputs_of(row: dict[str, str]) -> dict[str, float]:
    pairs = (pair.split("=") for pair in row["inputs"].split("; ") if "=" in pair)
    return {name: float(value) for name, value in pairs}


def checkpoints(*quantities: str) -> list:
    rows = [row for row in CHECKPOINTS if row["quantity"] in quantities]
    assert rows
    return [pytest.param(row, id=row["id"]) for row in rows]


def agrees(row: dict[str, str], value: float) -> bool:
    # A tolerance that is met to the last digit counts as met.
    return abs(value - float(row["expected"])) <= float(row["tolerance"]) + 1e-9


@pytest.mark.parametrize("row", checkpoints(*RATED))
def test_the_rating_and_its_parts_are_as_published(row) -> None:
    parts = rating(PlanningValues(**inputs_of(row)))
    assert agrees(row, getattr(parts, row["quantity"]))


@pytest.mark.parametrize("row", checkpoints("Id"))
def test_the_delay_parts_add_up_as_published(row) -> None:
    parts = rating(PlanningValues(**inputs_of(row)))
    assert agrees(row, parts.Idte + parts.Idle + parts.Idd)


@pytest.mark.parametrize("row", checkpoints("IeEff"))
def test_packet_loss_costs_what_was_published(row) -> None:
    assert agrees(row, effective_equipment_impairment(**inputs_of(row)))


@pytest.mark.parametrize("row", checkpoints("MOS"))
def test_the_mos_of_a_connection_is_as_published(row) -> None:
    assert agrees(row, mos_from_r(float(rating(PlanningValues(**inputs_of(row))).R)))


@pytest.mark.parametrize("row", checkpoints("MOS_from_R"))
def test_the_mos_of_a_rating_is_as_published(row) -> None:
    assert agrees(row, mos_from_r(inputs_of(row)["R"]))


@pytest.mark.parametrize("row", checkpoints("R_from_MOS"))
def test_the_published_inverse_leads_back_to_the_mos(row) -> None:
    assert mos_from_r(float(row["expected"])) == pytest.approx(inputs_of(row)["MOS"], abs=1e-5)


def test_every_published_check_point_is_used() -> None:
    used = RATED | {"Id", "IeEff", "MOS", "MOS_from_R", "R_from_MOS", "G109_category"}
    assert {row["quantity"] for row in CHECKPOINTS} == used


@pytest.mark.parametrize("row", [pytest.param(row, id=row["symbol"]) for row in published_rows("emodel_defaults")])
def test_default_and_range_of_a_parameter_are_as_published(row) -> None:
    parameter = PARAMETERS[row["symbol"]]
    assert parameter.default == float(row["default"])
    if row["min"]:
        assert (parameter.low, parameter.high) == (float(row["min"]), float(row["max"]))


def test_every_published_parameter_can_be_set_and_no_other() -> None:
    assert set(PARAMETERS) == {row["symbol"] for row in published_rows("emodel_defaults")}


def permitted(symbol: str) -> st.SearchStrategy[float]:
    row = PARAMETERS[symbol]
    return st.floats(row.low, row.high)


@settings(max_examples=300, deadline=None)
@given(st.fixed_dictionaries({}, optional={symbol: permitted(symbol) for symbol in PARAMETERS}))
def test_every_part_agrees_with_the_slow_twin(values) -> None:
    ours, theirs = rating(PlanningValues(**values)), naive.parts(**twice_as_long(values))
    for name in PARTS:
        assert getattr(ours, name) == pytest.approx(theirs[name], abs=1e-6), name


@pytest.mark.parametrize("STMR", [8.0, 8.999, 9.0, 20.0, 20.001, 22.0])
def test_sidetone_out_of_range_changes_the_echo_as_the_twin_says(STMR) -> None:
    ours = rating(PlanningValues(STMR=STMR, TELR=50.0), Ta=80.0)
    theirs = naive.parts(STMR=STMR, TELR=50.0, T=80.0, Ta=80.0, Tr=160.0)
    assert ours.Idte == pytest.approx(theirs["Idte"], abs=1e-6)
    assert ours.R == pytest.approx(theirs["R"], abs=1e-6)


def twice_as_long(values: dict[str, float]) -> dict[str, float]:
    """What ``rating`` takes where T or Tr is left out: T = Ta and Tr = 2 T."""
    T = values.get("T", values.get("Ta", 0.0))
    return {"T": T, "Tr": 2.0 * T} | values


def test_arrays_come_out_as_if_each_had_been_rated_alone() -> None:
    delays, losses = np.array([[20.0], [180.0]]), np.array([0.0, 1.0, 12.0])
    together = rating(Ta=delays, Ie=11.0, Bpl=19.0, Ppl=losses, BurstR=[np.nan, 1.4, 3.0])
    assert together.R.shape == (2, 3)
    for name in PARTS:
        assert getattr(together, name).shape == (2, 3)
    alone = rating(Ta=180.0, Ie=11.0, Bpl=19.0, Ppl=1.0, BurstR=1.4)
    assert together.R[1, 1] == alone.R
    assert alone.R.shape == ()


def test_echo_path_and_round_trip_follow_the_delay_where_nothing_else_is_said() -> None:
    assert rating(Ta=150.0).R == rating(Ta=150.0, T=150.0, Tr=300.0).R
    assert rating(Ta=150.0).R > rating(Ta=150.0, Tr=900.0).R
    assert rating(Ta=150.0, T=20.0).R == rating(Ta=150.0, T=20.0, Tr=40.0).R


def test_a_planned_value_stands_whatever_was_measured() -> None:
    planned = PlanningValues(Ta=150.0, Ppl=2.0, Bpl=25.1)
    assert rating(planned, Ta=20.0, Ppl=9.0, Bpl=4.3).R == rating(Ta=150.0, Ppl=2.0, Bpl=25.1).R


@pytest.mark.parametrize("BurstR", [1.0, 0.7, 0.0, -3.0, np.nan])
def test_a_burst_ratio_below_one_or_undefined_counts_as_one(BurstR) -> None:
    assert effective_equipment_impairment(0.0, 25.1, 5.0, BurstR) == effective_equipment_impairment(0.0, 25.1, 5.0)


def test_losing_everything_costs_nearly_the_ceiling() -> None:
    assert effective_equipment_impairment(0.0, 4.3, 100.0) == pytest.approx(95.0 * 100.0 / 104.3)
    assert effective_equipment_impairment(20.0, 4.3, 100.0, 1e12) == pytest.approx(20.0 + 75.0 * 100.0 / 4.3)


@pytest.mark.parametrize("Ppl", [-0.1, 100.1])
def test_a_loss_that_is_no_percentage_is_refused(Ppl) -> None:
    with pytest.raises(ValueError, match="percentage"):
        effective_equipment_impairment(0.0, 4.3, Ppl)


def test_a_robustness_of_nothing_is_refused() -> None:
    with pytest.raises(ValueError, match="Bpl is over 0"):
        effective_equipment_impairment(0.0, 0.0, 1.0)


def test_what_is_not_known_stays_not_known() -> None:
    assert np.isnan(rating(Ta=np.nan).R)
    assert np.isnan(rating(Ppl=np.nan).R)
    assert np.isnan(delay_impairment(np.nan))
    assert np.isnan(mos_from_r(np.nan))


def test_a_negative_delay_counts_as_none() -> None:
    assert rating(Ta=-40.0).R == rating(Ta=0.0).R


def test_measured_values_far_outside_are_still_rated() -> None:
    worst = rating(PlanningValues(Ps=85.0), Ta=3000.0, Ppl=60.0, BurstR=40.0, TELR=0.0)
    assert np.isfinite(worst.R)
    assert worst.R < 0.0
    assert mos_from_r(float(worst.R)) == 1.0


def test_an_advantage_lifts_the_rating_over_100_but_not_the_mos_over_4_5() -> None:
    R = rating(PlanningValues(A=10.0)).R
    assert R > 100.0
    assert mos_from_r(float(R)) == 4.5


@settings(max_examples=100, deadline=None)
@given(st.floats(0, 100), st.floats(0, 100), st.floats(4.3, 40), st.floats(1, 8))
def test_more_loss_never_rates_better(one, other, Bpl, BurstR) -> None:
    less, more = sorted([one, other])
    assert rating(Bpl=Bpl, Ppl=more, BurstR=BurstR).R <= rating(Bpl=Bpl, Ppl=less, BurstR=BurstR).R


def test_arrays_handed_in_are_not_written_to() -> None:
    delays = np.array([-5.0, 20.0, 400.0])
    delays.flags.writeable = False
    assert rating(Ta=delays, Ppl=delays * 0).R.shape == (3,)


@settings(max_examples=200, deadline=None)
@given(st.fixed_dictionaries({}, optional={symbol: permitted(symbol) for symbol in PARAMETERS}))
def test_the_parts_add_up_to_the_last_bit(values) -> None:
    parts = rating(PlanningValues(**values))
    assert parts.R == parts.A - parts.Ie_eff - parts.Idd - parts.Idle - parts.Idte - parts.Is + parts.Ro
    assert parts.Is == parts.Iq + parts.Ist + parts.Iolr
