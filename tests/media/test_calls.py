"""Streams that become calls where no signalling tells."""

from rtpaudit.media.calls import pair_streams
from rtpaudit.media.streams import Stream
from tests.media.datagrams import joined, talk


def ports(stream: Stream, source: int, destination: int) -> Stream:
    stream.source_port, stream.destination_port = source, destination
    return stream


def test_a_source_that_goes_on_at_another_port_stays_in_its_call():
    there = talk(range(1000, 1300)), talk(range(1300, 1600), start_ms=6000.0, first_ticks=48_000, flow=2)
    streams = joined(*there, talk(range(600), start_ms=5.0, flow=1, ssrc=9)).streams()
    (call,) = pair_streams(streams)
    assert (len(call.from_caller), len(call.from_callee)) == (2, 1)
    assert streams[2].match_basis == "time"


def test_both_ways_may_move_to_other_ports():
    first = joined(talk(range(300)), talk(range(300), start_ms=5.0, flow=1, ssrc=9)).streams()
    second = joined(talk(range(300, 600), start_ms=6000.0), talk(range(300, 600), start_ms=6005.0, flow=1, ssrc=9))
    moved = [ports(one, one.source_port + 100, one.destination_port + 100) for one in second.streams()]
    (call,) = pair_streams([*first, *moved])
    assert [one.ssrc for one in call.from_caller] == [first[0].ssrc] * 2
    assert [one.ssrc for one in call.from_callee] == [9, 9]


def test_another_source_at_another_port_is_another_call():
    for numbers, ssrc in ((range(1300, 1600), 77), (range(30_000, 30_300), 0x1A2B3C4D)):
        later = talk(numbers, start_ms=6000.0, flow=2, ssrc=ssrc)
        assert len(pair_streams(joined(talk(range(1000, 1300)), later).streams())) == 2


def test_a_copy_of_a_stream_behind_a_relay_is_no_move():
    copy = talk(range(300), start_ms=0.3, flow=2)
    assert len(pair_streams(joined(talk(range(300)), copy).streams())) == 2


def test_ports_need_not_mirror_each_other_where_only_two_streams_face():
    forth, back = joined(talk(range(300)), talk(range(300), start_ms=5.0, flow=1, ssrc=9)).streams()
    (call,) = pair_streams([forth, ports(back, 5002, 4002)])
    assert (call.from_caller, call.from_callee) == ([forth], [back])
    assert (forth.match_basis, back.match_basis) == ("time", "time")


def test_ports_decide_where_three_streams_face():
    forth, back = joined(talk(range(300)), talk(range(300), start_ms=5.0, flow=1, ssrc=9)).streams()
    (third,) = talk(range(300), start_ms=7.0, flow=1, ssrc=10).streams()
    assert len(pair_streams([forth, ports(back, 5002, 4002), ports(third, 5004, 4004)])) == 3
