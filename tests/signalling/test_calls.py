from rtpaudit.signalling.calls import MediaTerm, SignallingMessage
from rtpaudit.signalling.sdp import parse_description
from tests.signalling.talk import described

SDP = described("192.0.2.101", 49170, "0 101", "rtpmap:101 telephone-event/8000", "sendonly") + "m=video 0 RTP/AVP 31\n"


def message(**said: object) -> SignallingMessage:
    row = SignallingMessage(0, "192.0.2.101:5060", "192.0.2.201:5060", "SIP", "UDP", "INVITE", "a@example.com")
    for name, value in said.items():
        setattr(row, name, value)
    return row


def test_a_message_in_one_line_says_what_it_asks_and_announces() -> None:
    row = message(target="sip:bob@example.com", description=parse_description(SDP.encode()))
    assert row.line == (
        "INVITE sip:bob@example.com; audio 192.0.2.101:49170 PCMU telephone-event sendonly; video declined"
    )


def test_the_impersonal_line_names_neither_party_nor_address() -> None:
    row = message(target="sip:bob@example.com", note="Reason x", description=parse_description(SDP.encode()))
    assert row.impersonal_line == "INVITE; audio PCMU telephone-event sendonly; video declined"
    assert message(message="486 Bob is busy", status_code=486).impersonal_line == "486"


def test_encryption_and_fax_are_told_in_the_line() -> None:
    srtp = parse_description(described("192.0.2.101", 4000).replace("RTP/AVP", "RTP/SAVP").encode())
    fax = parse_description(b"v=0\nc=IN IP4 192.0.2.101\nm=image 4002 udptl t38\n")
    assert message(description=srtp).line.endswith("audio 192.0.2.101:4000 PCMU sendrecv encrypted")
    assert message(description=fax).line.endswith("image 192.0.2.101:4002 t38 sendrecv")


def test_a_term_holds_from_its_begin_to_before_its_end() -> None:
    term = MediaTerm(10, 20, "caller", "audio", "192.0.2.101", 4000, "RTP/AVP", "sendrecv", {})
    assert [term.holds_at(time_ns) for time_ns in (9, 10, 19, 20)] == [False, True, True, False]
    term.until_ns = None
    assert term.holds_at(1 << 60)


def test_a_side_receives_unless_it_asks_for_silence() -> None:
    term = MediaTerm(0, None, "caller", "audio", "192.0.2.101", 4000, "RTP/AVP", "sendrecv", {})
    told = {}
    for direction in ("sendrecv", "recvonly", "sendonly", "inactive"):
        term.direction = direction
        told[direction] = term.receives
    assert told == {"sendrecv": True, "recvonly": True, "sendonly": False, "inactive": False}
