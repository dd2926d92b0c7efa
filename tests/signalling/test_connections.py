import pytest

from rtpaudit.signalling.connections import PATIENCE_OCTETS, Connection, may_carry_sip
from tests.signalling import torture
from tests.signalling.test_websocket import INVITE, REQUEST, RESPONSE, frame
from tests.signalling.torture import request, wire


@pytest.mark.parametrize("handshake", [REQUEST, RESPONSE])
@pytest.mark.parametrize("step", [1, 7, 100, 5000])
def test_rfc_7118_sip_behind_the_handshake_of_either_side(handshake: bytes, step: int) -> None:
    octets = handshake + frame(b"\r\n\r\n") + frame(INVITE, key=b"abcd") + frame(INVITE, 2, key=b"efgh")
    one = Connection()
    found = [
        m for begin in range(0, len(octets), step) for m in one.feed(octets[begin : begin + step], begin, begin, False)
    ]
    assert [message.octets for message in found] == [INVITE, INVITE]
    assert one.transport == "WebSocket"


def test_a_capture_that_begins_behind_the_handshake_is_told_by_content() -> None:
    one = Connection()
    assert [m.octets for m in one.feed(frame(INVITE, key=b"abcd"), 0, 1, False)] == [INVITE]


def test_websocket_goes_on_behind_a_gap_where_a_frame_begins() -> None:
    one = Connection()
    one.feed(REQUEST + frame(INVITE)[:50], 0, 1, False)
    assert [m.octets for m in one.feed(frame(INVITE), 0, 2, True)] == [INVITE]


def test_sip_right_on_tcp_is_told_wherever_the_capture_begins() -> None:
    one, other = Connection(), Connection()
    assert [m.octets for m in one.feed(request("a"), 0, 1, False)] == [request("a")]
    assert [m.octets for m in other.feed(request("a")[100:] + request("b"), 0, 1, False)] == [request("b")]
    assert (one.transport, other.transport, other.skipped) == ("TCP", "TCP", len(request("a")) - 100)


@pytest.mark.parametrize(
    "octets",
    [
        b"\x16\x03\x01" + b"\0" * 500,
        wire("GET /index.html HTTP/1.1\nHost: www.example.com"),
        REQUEST + frame(b'{"a": 1}'),
    ],
)
def test_other_protocols_are_dropped_at_once(octets: bytes) -> None:
    one = Connection()
    assert one.feed(octets, 0, 1, False) == []
    assert one.dropped
    assert one.feed(request("a"), 0, 2, False) == []


def test_a_long_stream_without_a_start_line_is_dropped() -> None:
    one = Connection()
    for row in range(PATIENCE_OCTETS // 1000 + 20):
        one.feed(b"x" * 990 + b"\n" * 10, 0, row, False)
    assert one.dropped
    assert one.skipped == 0


@pytest.mark.parametrize("octets", [torture.NOREASON, torture.LONGREQ, torture.BIGCODE, b"\r\n\r\n" + INVITE, REQUEST])
@pytest.mark.parametrize("enough", [16, 64])
def test_few_octets_are_enough_to_follow_a_direction(octets: bytes, enough: int) -> None:
    assert may_carry_sip(octets[: enough + 4])
    assert may_carry_sip(frame(octets.strip(), key=b"abcd")[:enough])


@pytest.mark.parametrize(
    "octets", [b"", b"\x16\x03\x01\x02\x00", b"SSH-2.0-host", b"HTTP/1.1 200 OK", b"\0" * 64, b"\x81\x05he"]
)
def test_other_beginnings_are_not_followed(octets: bytes) -> None:
    assert not may_carry_sip(octets)


def test_a_new_connection_between_the_same_ports_begins_with_its_handshake() -> None:
    one = Connection()
    one.feed(REQUEST + frame(INVITE)[:50], 0, 1, False)
    assert [m.octets for m in one.feed(REQUEST + frame(INVITE), 0, 2, False)] == [INVITE]
