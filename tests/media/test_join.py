"""Streams that join the calls that were signalled."""

from typing import Any

from rtpaudit.media.agreed import Agreed
from rtpaudit.media.join import join
from rtpaudit.media.streams import Stream
from rtpaudit.signalling.calls import CALLEE, CALLER, MediaTerm, SipCall
from rtpaudit.signalling.payload_types import STATIC
from tests.media.datagrams import MS, START_MS, joined, talk
from tests.media.made_calls import party, sip_call

CALLER_HOST, CALLEE_HOST = "192.0.2.1", "198.51.100.1"


def at(ms: float) -> int:
    return round((START_MS + ms) * MS)


def said(name: str, from_ms: float, to_ms: float, *media: MediaTerm, **more: Any) -> SipCall:
    times = {"started_ns": at(from_ms), "answered_ns": at(from_ms), "released_ns": at(to_ms), "ended_ns": at(to_ms)}
    parties = party("0142", CALLER_HOST), party("0199", CALLEE_HOST)
    return sip_call(name, *parties, media=list(media), **(times | more))


def term(side: str, address: str, port: int) -> MediaTerm:
    return MediaTerm(at(0), None, side, "audio", address, port, "RTP/AVP", "sendrecv", {0: STATIC[0]})


def both_ways() -> list[Stream]:
    return joined(talk(range(300), start_ms=50.0), talk(range(300), start_ms=60.0, flow=1, ssrc=9)).streams()


def test_what_a_translator_moved_at_both_ends_joins_by_time():
    private = term(CALLER, "10.0.0.5", 7000), term(CALLEE, "10.0.1.5", 7002)
    streams = both_ways()
    (call,) = join(streams, [one := said("a", 0, 7000, *private)], Agreed([one]))
    assert (call.from_caller, call.from_callee) == ([streams[0]], [streams[1]])
    assert [one.match_basis for one in streams] == ["time", "mirror"]


def test_of_two_calls_between_the_same_hosts_the_one_answered_then_is_meant():
    private = term(CALLER, "10.0.0.5", 7000), term(CALLEE, "10.0.1.5", 7002)
    two = [said("a", -9000, 7000, *private), said("b", 0, 7000, *private)]
    calls = join(both_ways(), two, Agreed(two))
    assert [len(call.streams) for call in calls] == [0, 2]


def test_two_calls_answered_at_once_leave_it_open():
    private = term(CALLER, "10.0.0.5", 7000), term(CALLEE, "10.0.1.5", 7002)
    two = [said("a", 0, 7000, *private), said("b", 20, 7000, *private)]
    assert len(join(both_ways(), two, Agreed(two))) == 3


def test_a_stream_that_goes_on_elsewhere_stays_in_its_call():
    announced = term(CALLER, CALLER_HOST, 4000), term(CALLEE, CALLEE_HOST, 5000)
    (first,) = talk(range(1000, 1300), start_ms=50.0).streams()
    (later,) = talk(range(1300, 1600), start_ms=6050.0, first_ticks=48_000).streams()
    later.source_port, later.destination, later.destination_port = 4100, "203.0.113.9", 9000
    (call,) = join([first, later], [one := said("a", 0, 13_000, *announced)], Agreed([one]))
    assert call.from_caller == [first, later]
    assert later.match_basis == "time"


def test_media_that_ends_with_a_bye_belongs_to_the_call_whose_begin_was_not_captured():
    streams = both_ways()
    bye = said("a", 6100, 6100, answered_ns=None, began_before=True)
    (call,) = join(streams, [bye], Agreed([bye]))
    assert len(call.streams) == 2
    assert call.started_ns == at(50)


def test_media_that_goes_on_after_a_bye_is_of_another_call():
    bye = said("a", 1000, 1000, answered_ns=None, began_before=True)
    assert len(join(both_ways(), [bye], Agreed([bye]))) == 2
