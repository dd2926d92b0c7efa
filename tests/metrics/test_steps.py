"""Steps in a noisy series: found where they are, and not where there is only noise, a slope or a ramp."""

import numpy as np
import pytest

from rtpaudit.metrics.steps import scatter, slope_error, split_at_steps, sturdy_line

AT = np.arange(100.0)
WHOLE = np.zeros(100, np.int64)


def noise(seed) -> np.ndarray:
    return np.random.default_rng(seed).normal(0.0, 0.1, 100)


@pytest.mark.parametrize("place", [5, 30, 50, 94])
@pytest.mark.parametrize("height", [1.0, -3.0, 1000.0])
def test_a_step_is_found_at_its_place_beside_a_slope(place, height) -> None:
    level = noise(1) + 0.02 * AT + height * (AT >= place)
    assert split_at_steps(AT, level, WHOLE).tolist() == [0] * place + [1] * (100 - place)


def test_two_steps_make_three_pieces() -> None:
    level = noise(2) + 2.0 * (AT >= 30) - 5.0 * (AT >= 70)
    assert split_at_steps(AT, level, WHOLE).tolist() == [0] * 30 + [1] * 40 + [2] * 30


@pytest.mark.parametrize("seed", range(20))
def test_noise_on_a_slope_has_no_step(seed) -> None:
    assert not split_at_steps(AT, noise(seed) + 0.5 * AT, WHOLE).any()


def test_a_steady_ramp_has_no_step_in_it() -> None:
    ramp = np.clip((AT - 20) / 60, 0, 1) * 2.0
    assert len(set(split_at_steps(AT, noise(4) + ramp, WHOLE)[22:78])) == 1


def test_a_short_excursion_is_no_step() -> None:
    assert not split_at_steps(AT, noise(5) + 50.0 * (AT == 60), WHOLE).any()


def test_pieces_that_stand_already_are_kept() -> None:
    piece = (AT >= 50).astype(np.int64)
    level = noise(6) + 700.0 * piece + 2.0 * (AT >= 80)
    assert split_at_steps(AT, level, piece).tolist() == [0] * 50 + [1] * 30 + [2] * 20


def test_outliers_do_not_tilt_the_sturdy_line() -> None:
    level = noise(7) + 0.25 * AT
    level[90:] += 40.0
    slope, rest = sturdy_line(AT, level, np.ones(100), WHOLE)
    assert abs(slope - 0.25) < 4 * slope_error(AT, rest, WHOLE)


def test_scatter_is_the_deviation_whatever_the_slope() -> None:
    level = np.random.default_rng(8).normal(0.0, 2.0, 20_000) + np.arange(20_000)
    assert scatter(level) == pytest.approx(2.0, rel=0.05)


@pytest.mark.parametrize("many", [1, 2, 5])
def test_a_handful_of_levels_is_too_few_for_a_step(many) -> None:
    assert not split_at_steps(AT[:many], noise(9)[:many], WHOLE[:many]).any()
