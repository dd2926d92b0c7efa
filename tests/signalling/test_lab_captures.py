"""Real exchanges between independent agents, against the truth that was counted beside them (fixtures/README.md)."""

import json
from functools import cache
from typing import Any

import pytest

from rtpaudit.signalling import Signalling
from rtpaudit.signalling.conversations import conversations
from tests.signalling.recordings import FIXTURES, signalling_of

CAPTURES = [
    *("captures/busy-486.a", "captures/clean-pcmu-udp.a", "captures/dtmf-rfc4733.b-any-sll", "captures/hold-resume.a"),
    *("captures/loss3-random.b", "captures/proxy-two-legs.mon", "captures/sip-tcp.a", "captures/srtp-sdes.b"),
    *("captures/xr-loss3.a", "captures/jitter-normal10.b", "signalling/auth-407.mon"),
]
S = 1_000_000_000


@cache
def read(name: str) -> tuple[Signalling, dict[str, Any]]:
    truth = json.loads((FIXTURES / f"{name}.truth.json").read_text())
    return signalling_of(FIXTURES / f"{name}.pcap"), truth


def seconds(time_ns: int | None, first_ns: int) -> float | None:
    return None if time_ns is None else round((time_ns - first_ns) / S, 6)


@pytest.mark.parametrize("name", CAPTURES)
def test_every_message_is_found_with_its_time_frame_and_ends(name: str) -> None:
    signalling, truth = read(name)
    told = [{"call_id": dialog["call_id"], **one} for dialog in truth["sip_dialogs"] for one in dialog["messages"]]
    told.sort(key=lambda one: (one["t"], one["frame"]))
    first = signalling.messages[0].time_ns - round(told[0]["t"] * S)
    assert [
        (one.call_id, one.frame, one.source, one.destination, one.cseq, one.message) for one in signalling.messages
    ] == [
        (one["call_id"], one["frame"], one["src"], one["dst"], one["cseq"], one["line"].partition(" sip:")[0])
        for one in told
    ]
    assert [seconds(one.time_ns, first) for one in signalling.messages] == [one["t"] for one in told]
    assert signalling.damage == []
    assert not any(one.repeated for one in signalling.messages)


@pytest.mark.parametrize("name", CAPTURES)
def test_every_dialog_is_one_call_with_its_messages(name: str) -> None:
    signalling, truth = read(name)
    assert [call.call_id for call in signalling.calls] == [dialog["call_id"] for dialog in truth["sip_dialogs"]]
    assert [len(call.messages) for call in signalling.calls] == [
        len(dialog["messages"]) for dialog in truth["sip_dialogs"]
    ]
    assert {row.call for row in signalling.messages} == set(range(len(signalling.calls)))


@pytest.mark.parametrize("name", CAPTURES)
def test_announced_media_is_what_the_messages_say(name: str) -> None:
    signalling, truth = read(name)
    for call, dialog in zip(signalling.calls, truth["sip_dialogs"], strict=True):
        announced = {
            (attribute[0].partition(" ")[2].split()[0], next(line for line in one["sdp"] if line.startswith("c="))[9:])
            for one in dialog["messages"]
            if "sdp" in one and (attribute := [line for line in one["sdp"] if line.startswith("m=audio")])
        }
        assert {(str(term.port), term.address) for term in call.media} == announced
        assert {term.encrypted for term in call.media} == {"SAVP" in str(dialog["messages"])}


def test_a_refused_call() -> None:
    (call,) = read("captures/busy-486.a")[0].calls
    assert (call.outcome, call.status_code, call.release_by, call.answered_ns) == ("refused", 486, "", None)
    assert call.setup_delay_s == pytest.approx(0.041589)
    assert (call.caller.user, call.callee.user) == ("desk-201", "desk-202")


def test_a_call_on_hold_from_9_to_18_s() -> None:
    (call,) = read("captures/hold-resume.a")[0].calls
    assert [
        (seconds(hold.from_ns, call.started_ns), seconds(hold.until_ns, call.started_ns)) for hold in call.holds
    ] == [(9.056464, 18.105589)]
    assert call.holds[0].side == "caller"


def test_a_proxy_that_challenges_makes_one_call_of_two_hops() -> None:
    (call,) = read("signalling/auth-407.mon")[0].calls
    assert (call.outcome, call.status_code, call.release_by) == ("answered", 200, "caller")
    assert seconds(call.answered_ns, call.started_ns) == 1.007138
    assert seconds(call.released_ns, call.started_ns) == 15.010382
    assert call.setup_delay_s == pytest.approx(0.002044)


def test_a_call_that_the_callee_ends() -> None:
    (call,) = read("captures/loss3-random.b")[0].calls
    assert (call.release_by, seconds(call.released_ns, call.started_ns)) == ("callee", 39.011691)


def test_legs_through_a_proxy_that_hides_topology_are_one_conversation_each() -> None:
    signalling, truth = read("captures/proxy-two-legs.mon")
    numbers = dict(zip((call.call_id for call in signalling.calls), conversations(signalling.calls), strict=True))
    together = [{numbers[call_id] for call_id in call["call_ids"]} for call in truth["two_legs"]["calls"]]
    assert [len(one) for one in together] == [1, 1]
    assert together[0] != together[1]


def test_messages_spread_over_tcp_segments() -> None:
    """captures/sip-tcp-split-segments.pcap: one answered call without media, which the caller ends."""
    signalling = signalling_of(FIXTURES / "captures" / "sip-tcp-split-segments.pcap")
    (call,) = signalling.calls
    assert [row.message for row in signalling.messages] == ["INVITE", "180 Ringing", "200 OK", "ACK", "BYE", "200 OK"]
    assert {row.transport for row in signalling.messages} == {"TCP"}
    assert (call.outcome, call.release_by, call.media[0].port) == ("answered", "caller", 6000)


def test_both_sides_of_a_one_way_call_offer_both_ways() -> None:
    (call,) = signalling_of(FIXTURES / "captures" / "pcmu-sip-udp-one-way.pcap").calls
    assert [(term.side, term.address, term.port, term.direction) for term in call.media] == [
        ("caller", "127.0.0.1", 6001, "sendrecv"),
        ("callee", "127.0.0.1", 6000, "sendrecv"),
    ]
