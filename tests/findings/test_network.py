"""Loss rules on the smallest streams that show each pattern, and on those that almost do."""

import numpy as np
import pytest

from rtpaudit.profile import Profile
from tests.findings.made import Line, back, delays, found, names, only

# Losses placed by hand without any rhythm, all apart.
SCATTERED = (13, 40, 58, 121, 133, 180, 233, 240, 301, 322, 345, 410, 433, 441, 477)


def test_a_clean_call_has_no_finding_and_no_headline() -> None:
    assert found(Line(), back()) == []


def test_scattered_losses_are_random_loss_with_their_share_and_place() -> None:
    one = only("random-loss", found(Line(lost=SCATTERED), back()))
    assert one.measured == pytest.approx(3.0)
    assert (one.severity, one.where, one.stream) == ("fault", "before capture point", "s01")
    assert "3 %" in one.says
    assert "callee" in one.says


@pytest.mark.parametrize(("lost", "there"), [((), False), ((400,), False), ((400, 900), True)])
def test_random_loss_counts_from_one_in_a_thousand(lost, there) -> None:
    findings = found(Line(count=1500, lost=lost), back(count=1500))
    assert [one.finding for one in findings] == ["random-loss"] * there


def test_a_profile_moves_the_limit_and_is_named_as_its_source() -> None:
    strict = Profile(limits={"random-loss": 3.5})
    assert found(Line(lost=SCATTERED), back(), profile=strict) == []
    lenient = Profile(limits={"random-loss": 2.9})
    assert only("random-loss", found(Line(lost=SCATTERED), back(), profile=lenient)).basis == "profile"


@pytest.mark.parametrize(("run", "expected"), [(3, []), (4, ["loss-burst"]), (49, ["loss-burst"]), (50, ["outage"])])
def test_a_run_is_a_burst_over_60_ms_and_an_outage_from_1_s(run, expected) -> None:
    """At 20 ms: 3 packets are at the limit of 60 ms, 4 over it; 50 are 1 s."""
    findings = found(Line(count=3000, lost=range(700, 700 + run)), back(count=3000))
    assert [one.finding for one in findings if one.severity != "remark"] == expected


def test_two_bursts_and_scattered_losses_both_stand_with_their_shares() -> None:
    lost = [*SCATTERED, *range(700, 712), *range(1400, 1416)]
    findings = found(Line(count=2000, lost=lost), back(count=2000))
    burst, random = only("loss-burst", findings), only("random-loss", findings)
    assert burst.measured == 16 * 20
    assert burst.r_points > random.r_points > 0
    assert random.measured == pytest.approx(100 * len(SCATTERED) / 2000, abs=0.2)


def test_what_causes_take_adds_up_to_no_more_than_the_loss_takes() -> None:
    lost = [*SCATTERED, *range(700, 712), *range(1400, 1416)]
    findings = found(Line(count=2000, lost=lost), back(count=2000))
    from rtpaudit.emodel.g107 import effective_equipment_impairment

    all_of_it = float(effective_equipment_impairment(0.0, 25.1, 100.0 * len(lost) / 2000, 1.0))
    assert sum(one.r_points for one in findings if one.r_points == one.r_points) <= all_of_it + 0.5


@pytest.mark.parametrize(("times", "there"), [(3, False), (4, True)])
def test_loss_at_regular_intervals_is_periodic_from_four_events(times, there) -> None:
    lost = [150 + 200 * k for k in range(times)]
    findings = found(Line(count=1000, lost=lost), back(count=1000))
    assert ("periodic-loss" in [one.finding for one in findings]) is there


def test_the_period_is_told() -> None:
    lost = [k + n for k in range(150, 2000, 200) for n in range(3)]
    one = only("periodic-loss", found(Line(count=2000, lost=lost), back(count=2000)))
    assert "4 s" in one.says
    assert one.measured == 10


def test_uneven_intervals_are_no_period() -> None:
    lost = (150, 390, 520, 810, 890, 1300, 1420, 1890)
    assert "periodic-loss" not in [one.finding for one in found(Line(count=2000, lost=lost), back(count=2000))]


def test_one_packet_in_ten_evenly_is_policing() -> None:
    one = found(Line(count=1000, lost=range(50, 1000, 10)), back(count=1000))[0]
    assert (one.finding, one.severity) == ("policing", "fault")
    assert one.measured < 0.01
    assert "every 10th" in one.says


def test_one_packet_in_ten_by_chance_is_no_policing() -> None:
    draw = np.random.default_rng(3)
    lost = np.flatnonzero(draw.random(1000) < 0.1)
    assert names(Line(count=1000, lost=lost), back(count=1000))[0] == "random-loss"


def test_loss_at_the_top_of_a_queue_is_load() -> None:
    """Delay rises to 100 ms in 40 packets and stays for 20, of which every third is lost; four times."""
    rise = np.concatenate([np.linspace(0, 100, 40), np.full(20, 100.0), np.linspace(100, 0, 20)])
    firsts = (200, 420, 600, 830)
    lost = [first + 40 + k for first in firsts for k in (1, 4, 7, 10, 13)]
    one = found(Line(count=1000, lost=lost, delay_ms=delays(1000, [(k, rise) for k in firsts])), back(count=1000))[0]
    assert one.finding == "load"
    assert one.measured == pytest.approx(100.0, abs=1)
    assert one.severity == "fault"


def test_the_same_losses_beside_the_queue_are_not_load() -> None:
    rise = np.concatenate([np.linspace(0, 100, 40), np.full(20, 100.0), np.linspace(100, 0, 20)])
    firsts = (200, 420, 600, 830)
    lost = [first - 60 + k for first in firsts for k in (1, 4, 7, 15, 23)]
    line = Line(count=1000, lost=lost, delay_ms=delays(1000, [(k, rise) for k in firsts]))
    assert "load" not in [one.finding for one in found(line, back(count=1000))]


BURSTS = (120, 405, 533, 880)


def test_gaps_at_the_same_moments_both_ways_are_told_once() -> None:
    lost = [first + k for first in BURSTS for k in range(6)]
    findings = found(Line(count=1000, lost=lost), back(count=1000, lost=lost))
    one = only("loss-both-ways", findings)
    assert (findings[0].finding, one.stream, one.measured) == ("loss-both-ways", "", 100.0)
    assert "capture itself" in one.says


def test_gaps_at_other_moments_are_bursts_of_either_way() -> None:
    lost = [first + k for first in BURSTS for k in range(6)]
    other = [first + 60 + k for first in BURSTS for k in range(6)]
    assert set(names(Line(count=1000, lost=lost), back(count=1000, lost=other))) == {"loss-burst"}


def test_random_loss_of_both_ways_falls_together_by_chance_only() -> None:
    draw = np.random.default_rng(5)
    one, other = (np.flatnonzero(draw.random(1500) < 0.06) for _ in range(2))
    assert set(names(Line(count=1500, lost=one), back(count=1500, lost=other))) == {"random-loss"}


def test_packets_that_were_never_sent_are_the_senders_matter() -> None:
    """The IP identification goes on by one over every gap."""
    number = np.arange(500) - np.searchsorted(SCATTERED, np.arange(500))
    one = only("random-loss", found(Line(lost=SCATTERED, identification=number), back()))
    assert one.where == "endpoint"
    assert "never sent" in one.says
