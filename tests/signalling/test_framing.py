import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.signalling.framing import FramedMessage, MessageStream
from tests.signalling import torture
from tests.signalling.torture import OFFER, request, wire

BYE = wire("BYE sip:b@example.com SIP/2.0\nCall-ID: a\nCSeq: 2 BYE\nContent-Length: 0")
RINGING = wire("SIP/2.0 180 Ringing\nCall-ID: a\nCSeq: 1 INVITE\nl: 0")
INVITE = request("a")
EXCHANGE = [INVITE, RINGING, BYE, request("b"), RINGING]


def octets_of(messages: list[FramedMessage]) -> list[bytes]:
    return [one.octets for one in messages]


def test_several_messages_in_one_segment() -> None:
    assert octets_of(MessageStream().feed(b"".join(EXCHANGE), 0, 1)) == EXCHANGE


def test_one_message_over_many_segments_takes_time_and_frame_of_the_last() -> None:
    stream = MessageStream()
    pieces = [INVITE[:10], INVITE[10:200], INVITE[200:-1], INVITE[-1:]]
    found = [one for row, piece in enumerate(pieces) for one in stream.feed(piece, 100 + row, 7 + row)]
    assert found == [FramedMessage(INVITE, 103, 10, first_frame=7)]


@settings(max_examples=150)
@given(st.lists(st.sampled_from(EXCHANGE), max_size=5), st.lists(st.integers(1, 700), max_size=30), st.booleans())
def test_however_segments_are_cut_the_messages_are_the_same(
    messages: list[bytes], cuts: list[int], keep_alive: bool
) -> None:
    octets = (b"\r\n\r\n" if keep_alive else b"").join(messages)
    stream, found, begin = MessageStream(), [], 0
    for cut in [*cuts, len(octets) + 1]:
        found += stream.feed(octets[begin : begin + cut], 0, 1)
        begin += cut
    assert octets_of(found) == messages
    assert all(one.whole for one in found)
    assert stream.skipped == 0


def test_rfc_5626_keep_alives_between_messages_are_nothing() -> None:
    stream = MessageStream()
    assert octets_of(stream.feed(b"\r\n\r\n" + BYE + b"\r\n\r\n\r\n", 0, 1) + stream.feed(b"\r\n" + BYE, 0, 2)) == [
        BYE,
        BYE,
    ]


@pytest.mark.parametrize("begin", range(1, len(INVITE), 7))
def test_a_capture_that_begins_in_the_middle_of_a_message_finds_the_next(begin: int) -> None:
    stream = MessageStream()
    found = stream.feed(INVITE[begin:] + BYE, 0, 1)
    assert octets_of(found) == [BYE]
    assert stream.skipped == len(INVITE[begin:].lstrip(b"\r\n"))


def test_a_gap_within_a_body_gives_what_is_there_and_the_next_message() -> None:
    stream = MessageStream()
    cut = len(INVITE) - 40
    found = stream.feed(INVITE[:cut], 0, 1) + stream.feed(OFFER[-10:] + BYE, 5, 2, gap_before=True)
    assert found == [FramedMessage(INVITE[:cut], 0, 1, False, 1), FramedMessage(BYE, 5, 2, True, 2)]
    assert stream.skipped == 10


def test_a_gap_within_the_head_gives_what_is_there() -> None:
    stream = MessageStream()
    found = stream.feed(INVITE[:80], 0, 1) + stream.feed(BYE, 5, 2, gap_before=True)
    assert found == [FramedMessage(INVITE[:80], 0, 1, False, 1), FramedMessage(BYE, 5, 2, True, 2)]


def test_missing_octets_that_nobody_told_of_do_not_swallow_the_next_message() -> None:
    cut = INVITE[: INVITE.index(b"m=video")]
    assert octets_of(MessageStream().feed(cut + BYE + RINGING, 0, 1)) == [cut, BYE, RINGING]


def test_rfc_4475_3_1_2_2_a_length_beyond_the_next_start_line_is_not_believed() -> None:
    found = MessageStream().feed(request("clerr", length="400") + BYE + RINGING + request("b"), 0, 1)
    assert octets_of(found) == [request("clerr", length="400"), BYE, RINGING, request("b")]


def test_a_length_that_never_comes_true_gives_way_when_the_stream_ends() -> None:
    stream = MessageStream()
    assert stream.feed(torture.CLERR + BYE, 0, 1) == []
    assert octets_of(stream.flush()) == [torture.CLERR, BYE]


def test_a_length_that_ends_within_a_line_of_the_description_is_not_believed() -> None:
    short = request("short", length="142")
    assert octets_of(MessageStream().feed(short + BYE, 0, 1)) == [short, BYE]


@pytest.mark.parametrize("octets", [torture.NCL, torture.FIVE, torture.INV2543])
def test_without_a_usable_length_the_body_reaches_to_the_next_start_line(octets: bytes) -> None:
    assert octets_of(MessageStream().feed(octets + BYE, 0, 1)) == [octets, BYE]


def test_a_start_line_within_a_fragment_of_a_message_is_no_next_message() -> None:
    fragment = b"SIP/2.0 200 OK\r\nTo: <sip:c@example.com>\r\n"
    head = f"NOTIFY sip:a@example.com SIP/2.0\nContent-Type: message/sipfrag\nContent-Length: {len(fragment)}"
    notify = wire(head, fragment)
    assert octets_of(MessageStream().feed(notify + BYE, 0, 1)) == [notify, BYE]


def test_octets_that_are_no_sip_are_counted_and_not_kept() -> None:
    stream = MessageStream()
    for row in range(200):
        assert stream.feed(b"\x17\x03\x03" + bytes([row]) * 1400, 0, row) == []
    assert stream.skipped > 250_000


def test_an_endless_head_and_single_octets_are_bounded() -> None:
    stream = MessageStream()
    head = b"INVITE sip:a@example.com SIP/2.0\r\n" + b"X: y\r\n" * 20_000
    assert len(octets_of(stream.feed(head, 0, 1))) == 1
    slow = MessageStream()
    for row in range(20_000):
        slow.feed(b"A", 0, row)
    assert slow.skipped > 10_000


@settings(max_examples=200)
@given(st.lists(st.one_of(st.sampled_from([*EXCHANGE, b"\r\n", b"SIP/2.0 "]), st.binary(max_size=60)), max_size=12))
def test_noise_between_messages_never_fails(chunks: list[bytes]) -> None:
    stream = MessageStream()
    total = sum(
        len(one.octets) for row, chunk in enumerate(chunks) for one in stream.feed(chunk, row, row, row % 3 == 2)
    )
    total += sum(len(one.octets) for one in stream.flush())
    assert total + stream.skipped <= sum(map(len, chunks))
