"""Rules about order, copies, marking and route."""

import numpy as np
import pytest

from tests.findings.made import Line, back, delays, found, names, only


@pytest.mark.parametrize(("overtaken", "there"), [(9, False), (10, True)])
def test_reordering_counts_from_one_in_a_hundred(overtaken, there) -> None:
    line = Line(count=1000, delay_ms=delays(1000, [(50 + 90 * k, [30.0]) for k in range(overtaken)]))
    assert names(line, back(count=1000)) == ["reordering"] * there


def test_overtaken_packets_that_come_too_late_are_counted_against_the_order() -> None:
    line = Line(count=1000, delay_ms=delays(1000, [(50 + 31 * k, [90.0]) for k in range(30)]))
    one = found(line, back(count=1000))[0]
    assert (one.finding, one.severity) == ("reordering", "fault")
    assert "30 packets of them too late" in one.says


def test_order_lost_by_wild_delays_is_only_remarked() -> None:
    delay = np.random.default_rng(1).uniform(0, 55, 1000)
    one = only("reordering", found(Line(count=1000, delay_ms=delay), back(count=1000)))
    assert one.severity == "remark"


@pytest.mark.parametrize(("copies", "there"), [(9, False), (11, True)])
def test_copies_count_from_one_in_a_hundred(copies, there) -> None:
    line = Line(count=1000, copies=[40 * k + 7 for k in range(copies)])
    assert names(line, back(count=1000)) == ["duplicates"] * there


def test_an_unmarked_direction_beside_a_marked_one_is_a_concern_where_routers_lie_between() -> None:
    findings = found(Line(dscp=0), back())
    one = only("marking-absent", findings)
    assert (one.severity, one.where, one.stream) == ("concern", "before capture point", "s01")


def test_on_one_wire_it_is_a_remark() -> None:
    one = only("marking-absent", found(Line(dscp=0, ttl=64), back(ttl=64)))
    assert (one.severity, one.where) == ("remark", "endpoint")


def test_where_nothing_is_marked_nothing_is_said() -> None:
    assert found(Line(dscp=0), back(dscp=0)) == []


def test_a_marking_that_changes_for_good_is_told_with_its_time() -> None:
    one = found(Line(dscp=np.repeat([46, 0], [200, 300])), back())[0]
    assert (one.finding, one.severity, one.from_s) == ("marking-changed", "concern", pytest.approx(4.0))
    assert "from EF (46) to best effort (0)" in one.says


def test_a_marking_that_changes_for_a_few_packets_is_let_pass() -> None:
    assert found(Line(dscp=np.repeat([46, 0, 46], [200, 24, 276])), back()) == []


def test_a_step_of_the_time_to_live_with_delay_is_another_route() -> None:
    line = Line(ttl=np.repeat([60, 57], [250, 250]), delay_ms=np.repeat([5.0, 17.0], [250, 250]))
    one = found(line, back())[0]
    assert (one.finding, one.measured, one.from_s) == ("route-change", 1, pytest.approx(5.017, abs=0.001))
    assert "3 routers more, delay grew by 12 ms" in one.says


def test_packets_too_late_after_the_step_are_the_routes() -> None:
    line = Line(ttl=np.repeat([60, 57], [250, 250]), delay_ms=np.repeat([5.0, 80.0], [250, 250]))
    one = found(line, back())[0]
    assert (one.finding, one.severity) == ("route-change", "fault")
    assert "250 packets came too late" in one.says


def test_a_time_to_live_that_alternates_is_no_change_of_route() -> None:
    assert found(Line(ttl=np.tile([60, 57], 250)), back()) == []
