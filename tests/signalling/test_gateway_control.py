"""MGCP: the examples of RFC 3435 appendix F. H.248: a call in the manner of H.248.1 Annex B."""

from rtpaudit.signalling.calls import SignallingMessage
from rtpaudit.signalling.gateway_control import GatewayControl
from rtpaudit.signalling.h248 import parse_h248
from rtpaudit.signalling.mgcp import parse_mgcp

AGENT, GATEWAY = "192.0.2.1:2727", "192.0.2.41:2427"
LOCAL = "v=0\no=- 25678 753849 IN IP4 192.0.2.41\ns=-\nc=IN IP4 192.0.2.41\nt=0 0\nm=audio 3456 RTP/AVP 0\n"
FAR = (
    "v=0\no=- 4723891 7428910 IN IP4 192.0.2.63\ns=-\nc=IN IP4 192.0.2.63\nt=0 0\n"
    "m=audio 3458 RTP/AVP 0 96\na=rtpmap:96 G726-32/8000\n"
)
CREATE = "CRCX 1204 aaln/1@rgw-2567.example.net MGCP 1.0\nC: A3C47F21456789F0\nL: p:10, a:PCMU\nM: recvonly\n"
CREATED = f"200 1204 OK\nI: FDE234C8\n\n{LOCAL}"
MODIFY = (
    "MDCX 1210 aaln/1@rgw-2567.example.net MGCP 1.0\nC: A3C47F21456789F0\nI: FDE234C8\n"
    f"M: recvonly\nX: 0123456789AE\nR: L/hu\nS: G/rt\n\n{FAR}"
)
DELETE = "DLCX 1211 aaln/1@rgw-2567.example.net MGCP 1.0\nC: A3C47F21456789F0\nI: FDE234C8\n"
DELETED = "250 1211 OK\nP: PS=1245, OS=62345, PR=780, OR=45123, PL=10, JI=27, LA=48\n"


def octets(text: str) -> bytes:
    return text.replace("\n", "\r\n").encode()


def row(at: int, source: str, destination: str, protocol: str = "MGCP") -> SignallingMessage:
    return SignallingMessage(at, source, destination, protocol, "UDP", "", "")


def mgcp(*texts: str) -> tuple[GatewayControl, list[SignallingMessage]]:
    control, rows = GatewayControl(), []
    for at, text in enumerate(texts):
        ends = (GATEWAY, AGENT) if text[0].isdigit() else (AGENT, GATEWAY)
        for message in parse_mgcp(octets(text)):
            rows.append(row(at, *ends))
            control.mgcp(message, rows[-1])
    return control, rows


def test_rfc_3435_f_3_the_response_tells_where_the_gateway_receives() -> None:
    control, rows = mgcp(CREATE, CREATED)
    (term,) = control.terms
    assert (term.address, term.port, term.direction, term.from_ns) == ("192.0.2.41", 3456, "recvonly", 1)
    assert (term.call_id, term.connection) == ("A3C47F21456789F0", "aaln/1@rgw-2567.example.net FDE234C8")
    assert [(one.message, one.cseq, one.call_id) for one in rows] == [
        ("CRCX", "1204", "A3C47F21456789F0"),
        ("200 OK", "1204", "A3C47F21456789F0"),
    ]
    assert rows[1].line == "200 OK aaln/1@rgw-2567.example.net; audio 192.0.2.41:3456 PCMU sendrecv"


def test_rfc_3435_f_4_the_command_tells_where_the_far_side_receives() -> None:
    control, _ = mgcp(CREATE, CREATED, MODIFY, "200 1210 OK\n")
    local, remote = control.terms
    assert (remote.address, remote.port, remote.encodings[96].name) == ("192.0.2.63", 3458, "G726-32")
    assert remote.connection == local.connection
    assert local.until_ns is None


def test_rfc_3435_f_5_a_deleted_connection_ends_its_terms() -> None:
    control, _ = mgcp(CREATE, CREATED, MODIFY, "200 1210 OK\n", DELETE, DELETED)
    assert [term.until_ns for term in control.terms] == [5, 5]


def test_a_far_side_described_before_the_connection_has_a_name_gets_it_later() -> None:
    control, _ = mgcp(CREATE + "\n" + FAR, CREATED)
    assert {term.connection for term in control.terms} == {"aaln/1@rgw-2567.example.net FDE234C8"}


def test_a_refused_command_describes_nothing() -> None:
    control, rows = mgcp(CREATE, "401 1204 Phone off-hook\n")
    assert control.terms == []
    assert rows[1].message == "401 Phone off-hook"


ADD = (
    "MEGACO/1 [192.0.2.1]:2944\nTransaction = 9998 {\n  Context = $ {\n    Add = A4444,\n    Add = $ {\n      Media {\n"
    "        Stream = 1 {\n          LocalControl { Mode = ReceiveOnly, nt/jit=40 },\n"
    "          Local {\nv=0\nc=IN IP4 $\nm=audio $ RTP/AVP 4 8\n          },\n"
    "          Remote {\n" + FAR + "          }\n        }\n      }\n    }\n  }\n}\n"
)
REPLY = "!/1 [192.0.2.41]:2944 P=9998{C=2000{A=A4444,A=A4445{M{ST=1{L{\n" + LOCAL + "}}}}}}\n"
SUBTRACT = "!/1 [192.0.2.1]:2944 T=9999{C=2000{S=A4444,S=A4445{AT{}}}}\n"
SUBTRACTED = "!/1 [192.0.2.41]:2944 P=9999{C=2000{S=A4444,S=A4445}}\n"


def h248(*texts: str) -> tuple[GatewayControl, list[SignallingMessage]]:
    control, rows = GatewayControl(), []
    for at, text in enumerate(texts):
        message = parse_h248(octets(text))
        ends = (AGENT, GATEWAY) if "[192.0.2.1]" in text else (GATEWAY, AGENT)
        for transaction in message.transactions:
            rows.append(row(at, *ends, protocol="H.248"))
            assert control.h248(message, transaction, rows[-1]) == []
    return control, rows


def test_h_248_reply_tells_where_the_termination_receives_and_which_context_it_got() -> None:
    control, rows = h248(ADD, REPLY)
    remote, local = control.terms
    assert (remote.address, remote.port, remote.call_id) == ("192.0.2.63", 3458, "2000")
    assert (local.address, local.port, local.call_id, local.connection) == ("192.0.2.41", 3456, "2000", "A4445 1")
    assert [(one.message, one.cseq) for one in rows] == [
        ("Transaction Add A4444 Add $", "9998"),
        ("Reply Add A4444 Add A4445", "9998"),
    ]


def test_h_248_a_subtracted_termination_ends_its_terms() -> None:
    control, _ = h248(ADD, REPLY, SUBTRACT, SUBTRACTED)
    assert [term.until_ns for term in control.terms] == [None, 3]
