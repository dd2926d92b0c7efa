from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.h248 import looks_like_h248, parse_h248
from tests.signalling.test_gateway_control import ADD, LOCAL, REPLY, octets


def test_long_and_short_names_are_read_alike() -> None:
    (reply,) = parse_h248(octets(REPLY)).transactions
    long = "MEGACO/1 [192.0.2.41]:2944\nReply = 9998 { Context = 2000 { Add = A4444, Add = A4445 { Media { Stream = 1 {"
    (same,) = parse_h248(octets(f"{long} Local {{\n{LOCAL}}} }} }} }} }} }}")).transactions
    assert same == reply
    assert (reply.number, reply.reply, reply.context, reply.commands) == (
        9998,
        True,
        "2000",
        ["Add A4444", "Add A4445"],
    )
    assert [(one.which, one.termination, one.stream) for one in reply.descriptors] == [("local", "A4445", "1")]


def test_an_escaped_brace_does_not_end_a_description() -> None:
    text = "!/1 [192.0.2.1]:2944 T=1{C=1{A=A1{M{L{\nv=0\ns=a\\}b\n}}}}}"
    (transaction,) = parse_h248(octets(text)).transactions
    assert transaction.descriptors[0].octets == b"v=0\ns=a}b"


def test_h_248_mode_is_the_direction_of_the_termination() -> None:
    message = parse_h248(octets(ADD))
    assert [(one.which, one.mode) for one in message.transactions[0].descriptors] == [
        ("local", "recvonly"),
        ("remote", "recvonly"),
    ]


@pytest.mark.parametrize("end", range(0, len(ADD) + 20, 5))
def test_every_prefix_of_h_248_is_read_or_refused(end: int) -> None:
    with suppress(MalformedPacket):
        parse_h248(octets(ADD)[:end])


def test_deep_nesting_and_long_texts_are_bounded() -> None:
    assert parse_h248(b"!/1 [192.0.2.1]:1 T=1{" + b"C=1{" * 15_000).transactions[0].number == 1
    assert len(parse_h248(b"!/1 [192.0.2.1]:1 " + b"T=1{}" * 5_000).transactions) == 64
    parse_h248(b"!/1 [192.0.2.1]:1 " + b'"' * 60_001)


@given(st.binary(max_size=200))
def test_noise_is_refused(noise: bytes) -> None:
    looks_like_h248(noise)
    with suppress(MalformedPacket):
        parse_h248(noise)
