"""Telephone events by RFC 4733, counted by hand, and those of real captures."""

import json
from pathlib import Path

import pytest

import rtpaudit
from rtpaudit.media.events import telephone_events
from tests.craft import rtp
from tests.media.datagrams import talk

CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"


def event(code: int, duration: int, end: bool = False, volume: int = 10) -> bytes:
    return bytes([code, end << 7 | volume]) + duration.to_bytes(2, "big")


def pressed(*packets: tuple[int, bytes]) -> list:
    """Events of a stream of 30 audio packets and then one event packet for each (timestamp, payload)."""
    made = talk(range(30))
    for k, (ticks, payload) in enumerate(packets):
        made.add(600 + 20.0 * k, rtp(payload, 30 + k, ticks, payload_type=101))
    (stream,) = made.streams()
    return telephone_events(stream, [made.packets().octets])


def test_an_end_told_three_times_is_one_digit():
    grow = [(4800, event(5, 160 * k)) for k in range(1, 5)]
    end = [(4800, event(5, 800, end=True))] * 3
    (five,) = pressed(*grow, *end)
    assert (five.digit, five.duration_ms, five.level_dbm0, five.packets, five.end_seen) == ("5", 100.0, -10.0, 7, True)


def test_a_lost_begin_is_known_from_the_timestamp():
    (star,) = pressed((4800, event(10, 640)), (4800, event(10, 800, end=True)), (4800, event(10, 800, end=True)))
    assert (star.digit, star.begin_s, star.duration_ms) == ("*", 0.6, 100.0)


def test_a_lost_end_is_said():
    (one,) = pressed(*[(4800, event(1, 160 * k)) for k in range(1, 4)])
    assert (one.end_seen, one.duration_ms) == (False, 60.0)


def test_the_same_digit_twice_is_two_events():
    first = [(4800, event(7, 800, end=True))] * 3
    second = [(6400, event(7, 800, end=True))] * 3
    assert [one.digit for one in pressed(*first, *second)] == ["7", "7"]


def test_a_long_event_goes_on_in_segments():
    whole = [(4800, event(3, 0xFFFF)), (4800 + 0xFFFF, event(3, 800)), (4800 + 0xFFFF, event(3, 960, end=True))]
    (three,) = pressed(*whole)
    assert three.duration_ticks == 0xFFFF + 960


def test_sixteen_is_the_hook_flash():
    (flash,) = pressed(*[(4800, event(16, 400, end=True))] * 3)
    assert (flash.name, flash.digit) == ("flash", "")


@pytest.mark.parametrize("name", ["dtmf-rfc4733.b-any-sll"])
def test_digits_of_a_real_call(name):
    truth = json.loads((CAPTURES / f"{name}.truth.json").read_text())
    audit = rtpaudit.audit(CAPTURES / truth["file"])
    wanted = {one["ssrc"]: one["telephone_events"] for one in truth["streams"] if one["telephone_events"]}
    for assessed in audit.assessment.streams:
        expected = wanted.get(f"0x{assessed.stream.ssrc:08x}", [])
        found = telephone_events(assessed.stream, audit.sound.buffers[0])
        assert [(one.digit, one.packets, one.duration_ms, -one.level_dbm0) for one in found] == [
            (one["digit"], one["packets"], one["duration_ms"], one["volume"]) for one in expected
        ]
