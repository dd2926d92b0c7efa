"""Delay rules on the smallest streams that show each pattern, and on those that almost do."""

import numpy as np
import pytest

from tests.findings.made import Line, back, found, held_up, names, only


def test_one_jump_of_delay_is_a_spike_with_its_height() -> None:
    findings = found(Line(count=1000, delay_ms=held_up(1000, [400], 200)), back(count=1000))
    one = only("delay-spike", findings)
    assert one.measured == pytest.approx(200, abs=1)
    # Of 200, 180, … 20 ms the buffer of 60 ms bridges the last three: 7 packets are late, 140 ms of speech.
    assert "7 packets came too late" in one.says
    assert one.severity != "remark"
    assert findings[0] is one


@pytest.mark.parametrize(("height", "there"), [(50, False), (52, True)])
def test_a_spike_counts_from_50_ms(height, there) -> None:
    delay = np.zeros(1000)
    delay[400:404] = height
    assert (
        "delay-spike" in [one.finding for one in found(Line(count=1000, delay_ms=delay), back(count=1000))]
    ) is there


def test_a_spike_that_the_buffer_bridges_is_a_remark() -> None:
    one = only("delay-spike", found(Line(count=1000, delay_ms=held_up(1000, [400], 58)), back(count=1000)))
    assert (one.severity, one.r_points) == ("remark", 0.0)


def test_jumps_at_regular_intervals_are_periodic_delay() -> None:
    line = Line(count=2000, delay_ms=held_up(2000, range(100, 2000, 250), 160))
    one = found(line, back(count=2000))[0]
    assert one.finding == "periodic-delay"
    assert "every 5 s (8 times)" in one.says
    assert one.measured == pytest.approx(160, abs=2)


def test_jumps_at_uneven_intervals_are_spikes() -> None:
    line = Line(count=2000, delay_ms=held_up(2000, (100, 420, 510, 1130, 1300, 1900), 160))
    assert names(line, back(count=2000))[0] == "delay-spike"


def test_a_delay_that_drifts_slowly_is_no_spike() -> None:
    slow = 80 * np.sin(np.arange(3000) / 480)
    assert "delay-spike" not in [one.finding for one in found(Line(count=3000, delay_ms=slow + 80), back(count=3000))]


def test_lasting_jitter_over_the_buffer_is_told_with_the_buffer_that_would_do() -> None:
    draw = np.random.default_rng(1)
    delay = draw.uniform(0, 150, 1500)
    delay[0] = 0
    one = found(Line(count=1500, delay_ms=delay), back(count=1500))[0]
    assert (one.finding, one.severity, one.limit) == ("jitter-beyond-buffer", "fault", 60.0)
    assert "would have raised R" in one.says


def test_jitter_within_the_buffer_is_no_finding() -> None:
    draw = np.random.default_rng(2)
    assert names(Line(count=1500, delay_ms=draw.uniform(0, 18, 1500)), back(count=1500)) == []


def test_a_passage_that_came_late_as_a_whole_is_a_spike_even_where_others_overtook_it() -> None:
    delay = np.zeros(1000)
    delay[400:415] = 200.0
    findings = found(Line(count=1000, delay_ms=delay), back(count=1000))
    assert [one.finding for one in findings] == ["delay-spike"]
