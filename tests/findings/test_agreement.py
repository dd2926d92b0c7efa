"""Rules about what was agreed and what was sent."""

import pytest

from tests.findings.made import Line, back, found, names, only
from tests.findings.sip import Said


def test_two_encodings_are_told_where_both_were_agreed() -> None:
    said = Said(caller_takes="0 8 101", callee_takes="0 8 101")
    one = only("encodings-differ", found(said.frames(), Line(), back(payload_type=8)))
    assert "caller sends PCMU and the callee PCMA" in one.says
    assert one.severity == "concern"


def test_a_type_that_the_receiver_did_not_offer_is_a_fault() -> None:
    one = found(Said(callee_takes="8 101").frames(), Line(), back())[0]
    assert (one.finding, one.severity, one.measured) == ("payload-type-not-agreed", "fault", 100.0)


def test_comfort_noise_that_was_not_offered_is_let_pass() -> None:
    import numpy as np

    kinds = np.where(np.arange(500) % 50 == 49, 13, 0)
    line = Line(payload_type=kinds, marks={k: b"\x40" for k in range(49, 500, 50)})
    assert "payload-type-not-agreed" not in names(Said().frames(), line, back())


@pytest.mark.parametrize(("asked", "there"), [(20, False), (30, True), (None, False)])
def test_a_packet_time_that_was_not_asked_for_is_told(asked, there) -> None:
    findings = found(Said(callee_ptime=asked).frames(), Line(), back())
    assert [one.finding for one in findings] == ["packet-time-wrong"] * there
    if there:
        assert (findings[0].measured, findings[0].limit) == (20.0, 30.0)


@pytest.mark.parametrize(("packet_ms", "there"), [(60, False), (80, True)])
def test_a_packet_time_over_60_ms_is_long_without_any_agreement(packet_ms, there) -> None:
    findings = names(Line(count=150, packet_ms=packet_ms), back(count=150, packet_ms=packet_ms))
    assert findings == ["packet-time-wrong"] * 2 * there
