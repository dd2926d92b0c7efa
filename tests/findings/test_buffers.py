"""Rules about the playout buffer, as the profile has it."""

import numpy as np
import pytest

from rtpaudit.emodel.g107 import rating
from rtpaudit.profile import Playout, Profile
from tests.findings.made import Line, back, found, only


def shaken(width: float, count: int = 1500) -> Line:
    delay = np.random.default_rng(4).uniform(0, width, count)
    delay[0] = 0
    return Line(count=count, delay_ms=np.maximum.accumulate(np.arange(count) * 20 + delay) - np.arange(count) * 20)


def buffer(nominal: float) -> Profile:
    return Profile(playout=Playout(nominal_ms=nominal))


def test_a_buffer_smaller_than_any_network_may_shake_is_shallow() -> None:
    one = found(shaken(45), back(count=1500), profile=buffer(15))[0]
    assert (one.finding, one.where, one.measured, one.limit) == ("buffer-shallow", "endpoint", 15.0, 50.0)


def test_a_network_that_shakes_more_is_to_blame_itself() -> None:
    one = found(shaken(80), back(count=1500), profile=buffer(15))[0]
    assert (one.finding, one.where) == ("jitter-beyond-buffer", "before capture point")


def test_the_buffer_that_suffices_is_neither() -> None:
    assert found(shaken(14), back(count=1500), profile=buffer(15)) == []


@pytest.mark.parametrize(("nominal", "there"), [(61, False), (250, True)])
def test_a_buffer_far_deeper_than_needed_costs_points(nominal, there) -> None:
    """61 ms holds up by too little to be worth a point; 250 ms makes 320 ms from mouth to ear."""
    findings = found(shaken(5), back(count=1500), profile=buffer(nominal))
    assert [one.finding for one in findings] == ["buffer-deep"] * 2 * there


def test_the_default_buffer_is_nobodys_so_it_is_not_called_deep() -> None:
    assert found(shaken(5), back(count=1500)) == []


def test_points_of_a_deep_buffer_are_those_of_its_delay() -> None:
    one = only(
        "buffer-deep",
        [each for each in found(shaken(0), back(count=1500), profile=buffer(250)) if each.stream == "s01"],
    )
    # 50 ms of network and 20 ms of packet time on top of 250 ms, or of the one packet that would do.
    expected = float(rating(Ta=50 + 20 + 20).R - rating(Ta=50 + 20 + 250).R)
    assert one.r_points == pytest.approx(expected, abs=0.1)
