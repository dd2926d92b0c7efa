"""Rules about the call: what came against what both sides waited for."""

import numpy as np
import pytest

from tests.findings.made import CALLEE, CALLER, Line, back, found, names
from tests.findings.sip import Said, refusal

PRIVATE = ("10.1.2.3", 4000)


def test_a_clean_call_with_signalling_has_no_finding() -> None:
    assert found(Said().frames(), Line(), back()) == []


def test_an_answered_call_without_packets_is_a_call_without_media() -> None:
    one = found(Said().frames())[0]
    assert (one.finding, one.severity) == ("no-media", "fault")
    assert one.measured == pytest.approx(10.13, abs=0.01)


def test_a_call_hung_up_at_once_is_not() -> None:
    assert found(Said(bye_ms=1900.0).frames()) == []


def test_a_private_address_is_named_as_the_likely_reason() -> None:
    one = found(Said(caller_at=PRIVATE).frames())[0]
    assert "the caller announced a private address" in one.says


def test_private_addresses_that_both_use_are_no_reason() -> None:
    both = Said(caller_at=PRIVATE, callee_at=("10.9.9.9", 5000))
    own = Line(count=5, source=PRIVATE, destination=("10.9.9.9", 5000))
    other = back(count=5, source=("10.9.9.9", 5000), destination=PRIVATE)
    assert "caller announced a private" not in found(both.frames(), own, other)[0].says


def test_one_direction_without_packets_is_one_way_media() -> None:
    one = found(Said().frames(), Line())[0]
    assert (one.finding, one.severity) == ("one-way-media", "fault")
    assert one.says.startswith("The caller heard nothing")


def test_a_refused_port_is_named_as_the_reason() -> None:
    one = found(Said().frames(), back(), refusal(500, CALLEE, CALLER))[0]
    assert one.finding == "one-way-media"
    assert "the callee's port is unreachable" in one.says


def test_media_before_the_answer_only_is_told() -> None:
    early = back(count=60, first_ms=-1400)
    one = found(Said().frames(), early)[0]
    assert one.finding == "no-media"
    assert "before the answer only" in one.says


def test_a_held_direction_is_not_missed() -> None:
    said = Said(changes=[(50.0, "sendonly")])
    assert "one-way-media" not in [one.finding for one in found(said.frames(), Line())]


@pytest.mark.parametrize(("first_ms", "there"), [(900, False), (1000, True)])
def test_media_is_late_from_one_second_after_the_answer(first_ms, there) -> None:
    findings = found(Said(answer_ms=0.0).frames(), Line(first_ms=first_ms, count=450), back())
    assert [one.finding for one in findings] == ["media-late"] * there


def test_a_sender_that_leaves_out_silence_is_not_late() -> None:
    pause = np.where(np.arange(400) >= 200, 800.0, 0.0)
    line = Line(
        count=400,
        first_ms=1200,
        sent_ms=np.arange(400) * 20.0 + pause,
        ticks=np.arange(400) * 160 + (pause * 8).astype(int),
    )
    assert "media-late" not in names(Said(answer_ms=0.0).frames(), line, back())


@pytest.mark.parametrize(("ringing_ms", "there"), [(-1000.0, False), (-900.0, True)])
def test_set_up_is_slow_over_five_seconds(ringing_ms, there) -> None:
    said = Said(invite_ms=-6000.0, ringing_ms=ringing_ms)
    assert names(said.frames(), Line(), back()) == ["setup-slow"] * there


def stranger(seconds: float) -> Line:
    return Line(source=("203.0.113.5", 6000), destination=("203.0.113.9", 7000), ssrc=9, count=int(seconds * 50))


@pytest.mark.parametrize(("seconds", "there"), [(14.5, False), (15.5, True)])
def test_a_call_without_bye_counts_once_the_capture_went_on_for_five_seconds(seconds, there) -> None:
    findings = [
        one for one in found(Said(bye_ms=None).frames(), Line(), back(), stranger(seconds)) if one.call == "c01"
    ]
    assert [one.finding for one in findings] == ["release-missing"] * there


def test_a_capture_that_ends_with_the_call_says_nothing_of_its_end() -> None:
    assert found(Said(bye_ms=None).frames(), Line(), back()) == []


@pytest.mark.parametrize(("bye_ms", "there"), [(9100.0, False), (8900.0, True)])
def test_media_goes_on_after_release_from_one_second_on(bye_ms, there) -> None:
    findings = names(Said(bye_ms=bye_ms).frames(), Line(), back(count=400))
    assert findings == ["media-after-release"] * there


@pytest.mark.parametrize(("changes", "there"), [
    ([(4000.0, "sendonly")], True),
    ([(4000.0, "sendonly"), (7000.0, "sendrecv")], False),
    ([(8000.0, "sendonly")], False),
])  # fmt: skip
def test_a_hold_that_lasts_to_the_end_is_not_released(changes, there) -> None:
    findings = [one.finding for one in found(Said(changes=changes).frames(), Line(), back(count=200))]
    assert ("hold-not-released" in findings) is there


def test_a_capture_of_the_callers_words_alone_sees_one_direction() -> None:
    one = found(Said(from_caller_only=True).frames(), Line())[0]
    assert (one.finding, one.where) == ("capture-one-way", "capture")
    assert "signalling included" in one.says
