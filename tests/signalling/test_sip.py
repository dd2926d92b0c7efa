from contextlib import suppress

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.sip import looks_like_sip, parse_message
from tests.signalling import torture
from tests.signalling.torture import OFFER, wire


@pytest.mark.parametrize("octets", torture.VALID)
def test_valid_torture_messages_of_rfc_4475_3_1_1_are_read_without_fault(octets: bytes) -> None:
    assert parse_message(octets).faults == ()


@pytest.mark.parametrize("octets", torture.TOLERATED)
def test_invalid_torture_messages_of_rfc_4475_3_1_2_that_can_be_placed_are_read(octets: bytes) -> None:
    assert parse_message(octets).call_id


@pytest.mark.parametrize("octets", torture.REFUSED)
def test_torture_messages_that_nobody_can_place_are_refused(octets: bytes) -> None:
    with pytest.raises(MalformedPacket):
        parse_message(octets)


@pytest.mark.parametrize("octets", torture.VALID + torture.TOLERATED + torture.REFUSED)
def test_every_torture_message_is_told_by_its_first_octets(octets: bytes) -> None:
    assert looks_like_sip(octets)


def test_3_1_1_1_folded_lines_compact_names_and_odd_case_are_read() -> None:
    message = parse_message(torture.WSINV)
    assert message.method == "INVITE"
    assert message.request_uri == "sip:vivekg@chair-dnrc.example.com;unknownparam"
    assert message.call_id == "wsinv.ndaksdj@192.0.2.1"
    assert (message.cseq_number, message.cseq_method) == (9, "INVITE")
    assert message.header("subject") == ""
    assert message.header("newfangledheader") == "newfangled value continued newfangled value"
    assert message.header("max-forwards") == "0068"
    assert len(message.values("via")) == 3
    assert message.header("unknownheaderwithunusualvalue") == ";;,,;;,;"
    assert message.body == OFFER


def test_3_1_1_2_a_method_of_odd_letters_and_octets_beyond_ascii_are_read() -> None:
    message = parse_message(torture.INTMETH)
    assert message.method == "!interesting-Method0123456789_*+`.%indeed'~"
    assert message.cseq_method == message.method
    assert message.call_id == "intmeth.word%ZK-!.*_+'@word`~)(><:\\/\"][?}{"
    assert "работающий" in message.header("from")
    assert message.header("extensionheader-!.%*+_`'~").endswith("大停電")


def test_control_characters_are_written_as_escapes() -> None:
    assert "BEL:\\\\x07 NUL:\\\\x00 DEL:\\\\x7f" in parse_message(torture.INTMETH).header("to")


def test_3_1_1_5_percent_is_no_escape_in_a_method_or_a_header_name() -> None:
    message = parse_message(torture.ESC02)
    assert message.method == "RE%47IST%45R"
    assert message.values("contact") == ["<sip:alias1@host1.example.com>", "<sip:alias3@host3.example.com>"]


def test_3_1_1_7_long_values_and_thirty_four_vias_are_kept() -> None:
    message = parse_message(torture.LONGREQ)
    assert message.call_id == "longreq.one" + "really" * 20 + "longcallid"
    assert len(message.values("via")) == 34
    assert message.body == OFFER


def test_3_1_1_8_octets_behind_the_body_of_a_datagram_are_set_aside() -> None:
    message = parse_message(torture.DBLREQ)
    assert message.method == "REGISTER"
    assert message.body == b""
    assert message.faults == (
        f"{len(torture.DBLREQ) - torture.DBLREQ.index(b'INVITE')} octets behind the body set aside",
    )


def test_3_1_1_9_several_values_are_told_apart_over_folded_lines() -> None:
    assert parse_message(torture.SEMIURI).values("accept")[1:] == [
        *("application/pkcs7-mime", "multipart/mixed", "multipart/signed"),
        *("message/sip", "message/sipfrag"),
    ]


def test_3_1_1_11_parts_of_a_multipart_body_come_one_by_one_with_their_octets() -> None:
    parts = parse_message(torture.MPART01).parts()
    assert [(part.content_type, part.octets) for part in parts] == [
        ("text/plain", b"Hello"),
        ("application/octet-stream", torture.SIGNATURE),
    ]


def test_3_1_1_12_and_13_reason_phrases_may_be_anything_or_nothing() -> None:
    assert parse_message(torture.UNREASON).start_line == "200 = 2**3 * 5**2 но сто девяносто девять - простое"
    empty = parse_message(torture.NOREASON)
    assert (empty.status_code, empty.reason_phrase, empty.start_line) == (100, "", "100")


@pytest.mark.parametrize("octets", [torture.CLERR, torture.NCL, torture.FIVE])
def test_3_1_2_2_and_3_a_wrong_content_length_leaves_the_body_whole(octets: bytes) -> None:
    message = parse_message(octets)
    assert message.body == OFFER
    assert len(message.faults) == 1


def test_a_content_length_that_ends_within_a_line_of_the_description_is_not_believed() -> None:
    message = parse_message(torture.request("short", length="142"))
    assert message.body == OFFER
    assert message.faults == ("Content-Length 142 ends within a line, so the body is all that follows",)


def test_3_1_2_7_to_10_oddities_of_the_request_line_are_overlooked() -> None:
    assert parse_message(torture.LTGTRURI).request_uri == "sip:user@example.com"
    assert parse_message(torture.LWSRURI).request_uri == "sip:user@example.com; lr"
    assert parse_message(torture.LWSSTART).request_uri == "sip:user@example.com"
    assert parse_message(torture.TRWS).request_uri == "sip:remote-target@example.com"


def test_3_1_2_17_the_method_of_the_start_line_counts() -> None:
    message = parse_message(torture.MISMATCH01)
    assert message.cseq_method == "OPTIONS"
    assert message.faults == ("CSeq of INVITE in OPTIONS",)


def test_3_3_8_the_first_of_several_values_counts() -> None:
    message = parse_message(torture.MULTI01)
    assert (message.call_id, message.cseq_number) == ("multi01.98asdh@192.0.2.1", 5)
    assert message.header("to") == "sip:user@example.com"
    assert len(message.faults) == 4


def test_3_3_9_conflicting_lengths_leave_the_body_whole() -> None:
    assert parse_message(torture.MCL01).body.startswith(b"There's no way")


def test_3_4_1_without_content_length_the_body_is_the_rest_of_the_datagram() -> None:
    assert parse_message(torture.INV2543).body == OFFER


def test_lower_case_methods_of_the_wild_are_known() -> None:
    octets = torture.request("lower", start_line="invite sip:0142@example.com sip/2.0", cseq="1 Invite")
    message = parse_message(octets)
    assert (message.method, message.cseq_method, message.faults) == ("INVITE", "INVITE", ())


def test_lines_may_end_with_a_line_feed_alone() -> None:
    message = parse_message(torture.NOREASON.replace(b"\r\n", b"\n"))
    assert message.call_id == "noreason.asndj203insdf99223ndf"
    assert message.faults == ()


def test_octets_that_are_no_utf_8_stay_readable() -> None:
    octets = wire('OPTIONS sip:a@example.com SIP/2.0\nFrom: "J\xfcrgen" <sip:a@example.com>').decode().encode("latin-1")
    octets = octets.replace(b"\r\n\r\n", b"\r\nTo: <sip:b@example.com>\r\nCall-ID: x\r\nCSeq: 1 OPTIONS\r\n\r\n")
    assert parse_message(octets).header("from") == '"J\\xfcrgen" <sip:a@example.com>'


def test_a_message_cut_within_its_header_keeps_whole_lines_only() -> None:
    cut = torture.NOREASON[: torture.NOREASON.index(b"02jndnke3")]
    message = parse_message(cut, whole=False)
    assert message.header("to") == ""
    assert "no empty line behind the header fields" in message.faults


def test_a_body_without_content_type_is_told_by_its_first_line() -> None:
    octets = torture.request("bare").replace(b"Content-Type: application/sdp\r\n", b"")
    assert [part.content_type for part in parse_message(octets).parts()] == ["application/sdp"]


def test_a_multipart_body_within_another_is_opened() -> None:
    inner = b"--in\r\n\r\nplain\r\n--in\r\nContent-Type: application/sdp\r\n\r\nv=0\r\n--in--"
    outer = b"--out\r\nContent-Type: multipart/mixed; boundary=in\r\n\r\n" + inner + b"\r\n--out--\r\n"
    octets = torture.request("nested", length="", body=outer).replace(
        b"application/sdp", b'multipart/mixed;boundary="out"', 1
    )
    assert [(part.content_type, part.octets) for part in parse_message(octets).parts()] == [
        ("", b"plain"),
        ("application/sdp", b"v=0"),
    ]


@pytest.mark.parametrize("octets", [torture.WSINV, torture.MPART01, torture.UNREASON])
def test_every_prefix_is_read_or_refused(octets: bytes) -> None:
    for end in range(len(octets)):
        with suppress(MalformedPacket):
            parse_message(octets[:end], whole=False).parts()


OTHERS = [
    *(b"", b"\r\n\r\n", b"\0" * 64, b"\x80\x00" * 20, b"SIP", b"HELO example.com SIP\r\n", b"200 1203 OK\r\n"),
    *(b"GET / HTTP/1.1\r\n\r\n", b"M-SEARCH * HTTP/1.1\r\nHOST: 239.255.255.250:1900\r\n\r\n"),
]


@pytest.mark.parametrize("octets", OTHERS)
def test_other_protocols_do_not_look_like_sip(octets: bytes) -> None:
    assert not looks_like_sip(octets)


@settings(max_examples=300)
@given(st.binary(max_size=400))
def test_noise_is_refused_with_our_own_error(octets: bytes) -> None:
    looks_like_sip(octets)
    with suppress(MalformedPacket):
        parse_message(octets)


@settings(max_examples=300)
@given(st.data())
def test_damaged_messages_are_read_or_refused(data: st.DataObject) -> None:
    octets = bytearray(data.draw(st.sampled_from(torture.VALID + torture.TOLERATED)))
    for _ in range(data.draw(st.integers(1, 8))):
        place = data.draw(st.integers(0, len(octets) - 1))
        octets[place : place + data.draw(st.integers(0, 20))] = data.draw(st.binary(max_size=10))
    with suppress(MalformedPacket):
        parse_message(bytes(octets)).parts()


def test_a_hostile_start_line_or_boundary_costs_no_time() -> None:
    for octets in (b"INVITE" + b" " * 60_000, b"INVITE sip:a" + b" " * 60_000 + b"SIP/2.", b"SIP/2.0" + b" " * 60_000):
        with pytest.raises(MalformedPacket):
            parse_message(octets)
        looks_like_sip(octets)
    body = b"--a\r\n" * 20_000
    octets = torture.request("many", length="", body=body).replace(b"application/sdp", b"multipart/mixed;boundary=a")
    assert len(parse_message(octets).parts()) <= 32
