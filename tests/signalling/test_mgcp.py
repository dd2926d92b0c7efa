from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.mgcp import looks_like_mgcp, parse_mgcp
from tests.signalling.test_gateway_control import CREATE, CREATED, MODIFY, octets


def test_rfc_3435_f_3_a_command_and_its_response() -> None:
    (command,), (response,) = parse_mgcp(octets(CREATE)), parse_mgcp(octets(CREATED))
    assert (command.verb, command.transaction, command.endpoint) == ("CRCX", 1204, "aaln/1@rgw-2567.example.net")
    assert (command.call_id, command.mode, command.description) == ("A3C47F21456789F0", "recvonly", None)
    assert (response.status, response.transaction, response.comment) == (200, 1204, "OK")
    assert response.connection == "FDE234C8"
    assert response.description is not None
    assert response.description.media[0].port == 3456


def test_a_description_that_makes_no_sense_is_a_fault_and_no_more() -> None:
    (response,) = parse_mgcp(octets("200 1204 OK\nI: FDE2\n\nnothing\n"))
    assert (response.connection, response.description) == ("FDE2", None)
    assert "session description" in response.fault


def test_rfc_3435_3_5_5_messages_that_ride_together_are_parted() -> None:
    together = parse_mgcp(octets("200 2005 OK\n.\nDLCX 1244 card23/21@tgw-7.example.net MGCP 1.0\nC: A3C4\nI: FDE2\n"))
    assert [(one.status, one.verb) for one in together] == [(200, ""), (0, "DLCX")]


def test_a_verb_may_be_written_small() -> None:
    assert parse_mgcp(octets(CREATE.replace("CRCX", "crcx")))[0].verb == "CRCX"


@pytest.mark.parametrize("text", ["", "HELO 12 x", "CRCX x y MGCP 1.0", "\0\0\0\0", "ABCD 1 x MGCP 1.0"])
def test_what_is_no_mgcp_is_refused(text: str) -> None:
    with pytest.raises(MalformedPacket):
        parse_mgcp(text.encode())


@pytest.mark.parametrize("end", range(0, len(MODIFY) + 20, 3))
def test_every_prefix_of_a_command_is_read_or_refused(end: int) -> None:
    looks_like_mgcp(octets(MODIFY)[:end])
    with suppress(MalformedPacket):
        parse_mgcp(octets(MODIFY)[:end])


@given(st.binary(max_size=200))
def test_noise_is_refused(noise: bytes) -> None:
    looks_like_mgcp(noise)
    with suppress(MalformedPacket):
        parse_mgcp(noise)
