"""Packets shared out among causes."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.findings.case import Whole
from rtpaudit.findings.share import Claim, claim, loss_without, points_of, settle
from rtpaudit.profile import Profile
from tests.findings.made import Line, assessed, back

LOST = (100, 101, 102, 250, 400, 401)


def facts_of(line: Line):
    assessment = assessed(line, back(count=line.count))
    return Whole(assessment, Profile()).facts(assessment.calls[0].from_caller[0])


@pytest.fixture(scope="module")
def lossy():
    return facts_of(Line(lost=LOST))


def test_what_is_gone_stands_in_runs(lossy) -> None:
    assert lossy.gone.place.tolist() == [100, 250, 400]
    assert lossy.gone.packets.tolist() == [3, 1, 2]
    assert not lossy.gone.late.any()


def test_late_packets_are_gone_as_well() -> None:
    delay = np.zeros(200)
    delay[[50, 90]] = 90.0
    late = facts_of(Line(count=200, lost=[70], delay_ms=delay))
    assert late.gone.place.tolist() == [50, 70, 90]
    assert late.gone.late.tolist() == [True, False, True]


def test_taking_a_run_away_leaves_the_loss_of_the_others(lossy) -> None:
    nothing = np.zeros(3, bool)
    assert loss_without(lossy.gone, nothing, 500) == pytest.approx((1.2, 6 / 3 * (1 - 6 / 500)))
    first = np.array([True, False, False])
    assert loss_without(lossy.gone, first, 500) == pytest.approx((0.6, 3 / 2 * (1 - 3 / 500)))
    assert loss_without(lossy.gone, ~nothing, 500)[0] == 0.0


def test_points_are_the_rating_without_the_cause_less_the_rating(lossy) -> None:
    """Ie,eff by G.107, 7-29, by hand: 95 Ppl / (Ppl / BurstR + 25.1) for 1.2 % in three runs and 0.6 % in two."""

    def impairment(share, burst):
        return 95.0 * share / (share / burst + 25.1)

    expected = impairment(1.2, 2 * (1 - 6 / 500)) - impairment(0.6, 1.5 * (1 - 3 / 500))
    assert points_of(claim(lossy, np.array([0]))) == pytest.approx(expected, abs=1e-6)


def test_a_cause_that_is_half_sure_takes_half(lossy) -> None:
    whole, half = claim(lossy, np.array([0])), claim(lossy, np.array([0]), 0.5)
    assert points_of(half) == pytest.approx(points_of(whole) / 2)


def test_two_causes_share_a_packet_by_how_sure_they_are(lossy) -> None:
    one, other = claim(lossy, np.array([0]), 0.9), claim(lossy, np.array([0]), 0.3)
    left = settle([one, other], np.ones(3))
    assert one.weight.tolist() == pytest.approx([0.675, 0, 0])
    assert other.weight.tolist() == pytest.approx([0.225, 0, 0])
    assert left.tolist() == pytest.approx([0.1, 1, 1])


def test_a_later_cause_has_what_is_left(lossy) -> None:
    late = claim(lossy, np.array([0, 1]))
    settle([late], np.array([0.1, 1.0, 1.0]))
    assert late.weight.tolist() == pytest.approx([0.1, 1.0, 0.0])


weights = st.lists(st.floats(0, 1), min_size=3, max_size=3)


@given(st.lists(st.lists(weights, max_size=4), max_size=3))
def test_shares_of_a_packet_never_add_up_to_more_than_the_packet(tiers) -> None:
    facts = SHARED
    left, claims = np.ones(3), []
    for tier in tiers:
        made = [Claim(facts, np.array(one)) for one in tier]
        left = settle(made, left)
        claims += made
    taken = np.sum([one.weight for one in claims], axis=0) if claims else np.zeros(3)
    assert (taken <= 1 + 1e-9).all()
    assert taken + left == pytest.approx(np.ones(3))


SHARED = facts_of(Line(lost=LOST))
