"""Rules about what the ends do."""

import numpy as np
import pytest

from rtpaudit.profile import Profile
from tests.findings.made import Line, back, found, held_up, names, only

LONG = 2000
"""40 s: a skew is named from 30 s of audio on"""


@pytest.mark.parametrize(
    ("skew", "severity"), [(90, None), (-90, None), (115, "concern"), (-115, "concern"), (600, "fault")]
)
def test_a_clock_off_by_more_than_100_ppm_counts_either_way(skew, severity) -> None:
    findings = found(Line(count=LONG, skew_ppm=skew), back(count=LONG))
    assert [one.severity for one in findings] == ([severity] if severity else [])
    if severity:
        assert findings[0].finding == "clock-skew"
        assert findings[0].measured == pytest.approx(skew, abs=3)


def test_the_limit_of_skew_can_be_moved_to_either_side() -> None:
    lines = Line(count=LONG, skew_ppm=90), back(count=LONG)
    assert names(*lines, profile=Profile(limits={"clock-skew": 95})) == []
    assert names(*lines, profile=Profile(limits={"clock-skew": 85})) == ["clock-skew"]


def test_a_sender_that_sends_three_at_a_time_is_told() -> None:
    rows = np.arange(600)
    one = found(Line(count=600, sent_ms=(rows // 3 * 3 + 2) * 20.0), back(count=600))[0]
    assert (one.finding, one.where) == ("sender-pacing", "endpoint")
    assert "3 packets at a time every 60 ms" in one.says
    assert one.measured == pytest.approx(200.0, abs=5)


def test_a_sender_a_little_uneven_is_let_pass() -> None:
    rows = np.arange(600)
    assert found(Line(count=600, sent_ms=rows * 20.0 + (rows % 2) * 6), back(count=600)) == []


def test_numbers_skipped_over_unbroken_speech_are_no_loss() -> None:
    number = np.arange(500) + np.searchsorted((100, 210, 333, 401), np.arange(500), "right") * 3
    findings = found(Line(sequence=number), back())
    one = findings[0]
    assert (one.finding, one.measured, one.where) == ("sequence-fault", 4, "endpoint")
    assert one.r_points > 3
    assert "random-loss" not in [each.finding for each in findings if each.severity != "remark"]


def test_two_skips_are_below_the_limit_and_stay_loss() -> None:
    number = np.arange(500) + np.searchsorted((100, 210), np.arange(500), "right") * 3
    assert "sequence-fault" not in [one.finding for one in found(Line(sequence=number), back())]


def test_a_number_on_two_packets_is_a_fault_of_the_sender() -> None:
    number = np.arange(500) - np.searchsorted((100, 210, 333), np.arange(500), "right")
    one = only("sequence-fault", found(Line(sequence=number), back()))
    assert "3 numbers stood on two different packets" in one.says


def test_a_numbering_that_jumps_within_speech_is_no_restart() -> None:
    number = np.where(np.arange(500) < 250, np.arange(500), np.arange(500) + 20_000)
    one = found(Line(sequence=number), back())[0]
    assert one.finding == "sequence-fault"
    assert "jumped once" in one.says


@pytest.mark.parametrize(("jump_ms", "there"), [(80, False), (160, True), (-400, True)])
def test_timestamps_that_jump_while_packets_come_evenly_are_faulty(jump_ms, there) -> None:
    ticks = np.arange(500) * 160 + np.where(np.arange(500) >= 250, jump_ms * 8, 0) + 4000
    findings = names(Line(ticks=ticks), back())
    assert (findings[:1] == ["timestamp-fault"]) is there


def test_timestamps_at_twice_the_rate_are_a_fault() -> None:
    one = found(Line(ticks=np.arange(500) * 320), back())[0]
    assert (one.finding, one.severity) == ("timestamp-fault", "fault")
    assert "16,000 Hz where 8,000 Hz was agreed" in one.says


def test_a_pause_with_its_time_is_no_fault() -> None:
    pause = np.where(np.arange(500) >= 250, 900.0, 0.0)
    line = Line(ticks=np.arange(500) * 160 + (pause * 8).astype(int), sent_ms=np.arange(500) * 20.0 + pause)
    assert found(line, back(count=550)) == []


def test_a_new_ssrc_between_the_same_ends_is_a_restart() -> None:
    first, second = Line(count=250), Line(count=230, first_ms=5400, ssrc=0x77)
    one = found(first, second, back())[0]
    assert (one.finding, one.severity, one.stream) == ("source-restart", "concern", "s03")
    assert one.from_s == pytest.approx(5.4)


def test_numbers_and_timestamps_that_jump_together_are_a_restart() -> None:
    rows = np.arange(500)
    line = Line(
        sequence=np.where(rows < 250, rows, rows + 20_000), ticks=rows * 160 + np.where(rows < 250, 0, 7_000_000)
    )
    assert names(line, back())[0] == "source-restart"


def test_a_packet_time_that_changes_for_good_is_told() -> None:
    rows = np.arange(450)
    ticks = np.where(rows < 250, rows * 160, 250 * 160 + (rows - 250) * 320)
    line = Line(count=450, ticks=ticks, sent_ms=ticks / 8.0, marks={k: bytes([0xF0]) * 320 for k in range(250, 450)})
    one = found(line, back(count=600))[0]
    assert (one.finding, one.from_s) == ("packet-time-change", pytest.approx(5.0))
    assert "from 20 ms to 40 ms" in one.says


def test_a_sender_that_stops_and_goes_on_with_the_next_sample_is_told_with_the_length() -> None:
    one = found(Line(sent_ms=np.arange(500) * 20.0 + np.where(np.arange(500) >= 250, 900, 0)), back(count=560))[0]
    assert (one.finding, one.where) == ("sender-pacing", "endpoint")
    assert "for 900 ms" in one.says


def stops(ttl: int) -> list[str]:
    firsts = (20, 45, 98, 121, 170, 222, 260, 293, 351, 377, 420, 466)
    return names(Line(delay_ms=held_up(500, firsts, 100), ttl=ttl), back())


def test_a_sender_beside_the_capture_that_stalls_again_and_again_is_the_likely_cause() -> None:
    assert stops(ttl=64)[0] == "sender-pacing"


def test_behind_routers_stalls_may_be_anybodys() -> None:
    assert stops(ttl=61) == ["delay-spike"]


def test_one_far_jump_of_the_numbers_within_speech_counts_by_itself() -> None:
    one = found(Line(sequence=np.arange(500) + 700 * (np.arange(500) >= 250)), back())[0]
    assert (one.finding, one.measured) == ("sequence-fault", 1)
    assert "outage" not in [each.finding for each in found(Line(lost=()), back())]


def test_a_loss_after_a_longer_packet_time_is_no_skipped_number() -> None:
    """At 20 ms after 40 ms in most packets: the step over one missing packet is that of the longer ones."""
    rows = np.arange(600)
    ticks = np.where(rows < 400, rows * 320, 400 * 320 + (rows - 400) * 160)
    line = Line(count=600, ticks=ticks, sent_ms=ticks / 8.0, lost=(430, 470, 500, 533, 561))
    assert "sequence-fault" not in [one.finding for one in found(line, back(count=900))]


def test_timestamps_off_by_a_few_percent_are_no_clock() -> None:
    one = found(Line(count=LONG, ticks=np.arange(LONG) * 170), back(count=LONG))[0]
    assert one.finding == "timestamp-fault"
    assert "8,500 Hz" in one.says
