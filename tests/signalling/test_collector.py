from collections.abc import Callable, Sequence
from pathlib import Path

import pytest

from rtpaudit.signalling import Signalling
from tests.craft import ethernet, ipv4, ipv6, pcap, spaced, tcp, udp
from tests.signalling import torture
from tests.signalling.recordings import signalling_of
from tests.signalling.test_dialogs import answered_directly
from tests.signalling.test_quality_reports import RFC_6035_4_7_1
from tests.signalling.test_websocket import INVITE, REQUEST, frame
from tests.signalling.torture import request, wire

A, B = "192.0.2.101", "192.0.2.201"
Read = Callable[..., Signalling]


def datagram(octets: bytes, source: str = A, destination: str = B, port: int = 5060) -> bytes:
    return ethernet(ipv4(udp(octets, port, port), source, destination))


def exchange() -> list[bytes]:
    """RFC 3665, 3.1, on UDP."""
    return [datagram(octets, source[:-5], target[:-5]) for _, source, target, octets in answered_directly().octets]


@pytest.fixture
def read(tmp_path: Path) -> Read:
    def signalling(frames: Sequence[bytes], originals: Sequence[int] | None = None) -> Signalling:
        path = tmp_path / "made.pcap"
        path.write_bytes(pcap(frames, spaced(len(frames)), originals=originals))
        return signalling_of(path)

    return signalling


def test_a_call_on_udp_at_any_port(read: Read) -> None:
    frames = [
        datagram(octets, source[:-5], target[:-5], 41_000) for _, source, target, octets in answered_directly().octets
    ]
    signalling = read(frames)
    (call,) = signalling.calls
    assert (call.outcome, call.release_by, call.caller.address) == ("answered", "callee", f"{A}:41000")
    assert [row.frame for row in signalling.messages] == [1, 2, 3, 4, 5, 6]
    assert {row.capture for row in signalling.messages} == {"made.pcap"}
    assert {row.transport for row in signalling.messages} == {"UDP"}
    assert [row.call for row in signalling.messages] == [0] * 6


def test_a_retransmission_is_marked_and_counts_once(read: Read) -> None:
    frames = exchange()
    signalling = read([frames[0], frames[0], *frames[1:]])
    assert [row.repeated for row in signalling.messages] == [False, True, *[False] * 5]
    assert len(signalling.calls[0].media) == 2


def test_a_malformed_message_becomes_damage_and_the_rest_goes_on(read: Read) -> None:
    frames = exchange()
    signalling = read([datagram(torture.BADVERS), *frames, datagram(torture.INSUF)])
    assert len(signalling.calls) == 1
    assert [(row.capture, row.lost) for row in signalling.damage] == [("made.pcap", "the message")] * 2
    assert "SIP/7.0" in signalling.damage[0].what
    assert signalling.damage[0].offset == 24 + 16 + 14 + 20 + 8


def test_a_message_that_is_usable_though_wrong_is_used_and_noted(read: Read) -> None:
    signalling = read([datagram(torture.CLERR)])
    assert signalling.calls[0].media[0].port == 49217
    assert [row.lost for row in signalling.damage] == ["nothing else of it"]
    assert "Content-Length 9999" in signalling.damage[0].what


def test_a_message_cut_by_a_snap_length_gives_what_is_there(read: Read) -> None:
    whole = datagram(torture.UNREASON)
    cut = whole[: whole.index(b"m=video")]
    signalling = read([cut], originals=[len(whole)])
    assert [one.kind for one in signalling.calls[0].messages[0].description.media] == ["audio"]
    assert "the end of the message is missing" in signalling.damage[0].what


def test_a_broken_description_leaves_the_call(read: Read) -> None:
    signalling = read([datagram(request("a", length="", body=b"nothing"))])
    assert (signalling.calls[0].outcome, signalling.calls[0].media) == ("no reply", [])
    assert "session description" in signalling.damage[0].what


def test_a_flood_of_broken_messages_is_counted(read: Read) -> None:
    signalling = read([datagram(torture.INSUF)] * 1200)
    assert len(signalling.damage) == 1001
    assert signalling.damage[-1].what == "200 more damaged messages"


def test_other_texts_are_no_signalling(read: Read) -> None:
    texts = [
        b"M-SEARCH * HTTP/1.1\r\nHOST: 239.255.255.250:1900\r\n\r\n",
        b"<13>Oct 1 host: hello world",
        b"200 1 OK\r\n",
    ]
    signalling = read([datagram(text) for text in texts])
    assert (signalling.messages, signalling.damage) == ([], [])


def segments(octets: bytes, size: int, *, sequence: int = 1000) -> list[bytes]:
    starts = range(0, len(octets), size)
    return [ethernet(ipv4(tcp(octets[at : at + size], 40_000, 5060, sequence + at), A, B, protocol=6)) for at in starts]


@pytest.mark.parametrize("size", [1400, 97])
def test_sip_on_tcp_with_segments_out_of_order_and_repeated(read: Read, size: int) -> None:
    octets = b"".join(request(name) for name in "abc")
    frames = segments(octets, size)
    if size < 1000:
        frames[5], frames[6] = frames[6], frames[5]
    signalling = read([*frames, *frames[3:5]])
    assert [row.call_id[0] for row in signalling.messages] == ["a", "b", "c"]
    assert {row.transport for row in signalling.messages} == {"TCP"}


def test_sip_on_tcp_with_a_missing_segment_loses_one_message(read: Read) -> None:
    octets = b"".join(request(name) for name in "abc")
    frames = segments(octets, 100)
    place = len(request("a")) // 100 + 1
    signalling = read(frames[:place] + frames[place + 1 :])
    assert [row.call_id[0] for row in signalling.messages] == ["a", "c"]
    assert [row.lost for row in signalling.damage] == ["the message", "the messages that they belong to"]


def test_a_capture_that_starts_in_the_middle_of_a_connection(read: Read) -> None:
    frames = [ethernet(ipv4(tcp(request("a")[200:], 40_000, 5060, 1), A, B, protocol=6))]
    frames += [ethernet(ipv4(tcp(request("b"), 40_000, 5060, 1 + len(request("a")) - 200), A, B, protocol=6))]
    assert [row.call_id[0] for row in read(frames).messages] == ["b"]


def test_sip_in_websocket_frames(read: Read) -> None:
    signalling = read(segments(REQUEST + frame(INVITE, key=b"abcd") + frame(INVITE, key=b"efgh"), 300))
    assert [row.transport for row in signalling.messages] == ["WebSocket", "WebSocket"]
    assert [row.repeated for row in signalling.messages] == [False, True]


def test_ipv6_places_are_written_with_brackets(read: Read) -> None:
    (row,) = read([ethernet(ipv6(udp(torture.NOREASON, 5060, 5062)), 0x86DD)]).messages
    assert (row.source, row.destination) == ("[2001:db8::10]:5060", "[2001:db8::20]:5062")


def test_mgcp_and_h_248_describe_media_without_making_calls(read: Read) -> None:
    from tests.signalling.test_gateway_control import ADD, CREATE, CREATED, REPLY, octets

    frames = [
        *(datagram(octets(CREATE), B, A, 2427), datagram(octets(CREATED), A, B, 2427)),
        *(datagram(octets(ADD), B, A, 2944), datagram(octets(REPLY), A, B, 2944)),
    ]
    signalling = read(frames)
    assert signalling.calls == []
    assert [(term.address, term.port) for term in signalling.descriptions] == [
        ("192.0.2.41", 3456),
        ("192.0.2.63", 3458),
        ("192.0.2.41", 3456),
    ]
    assert [row.protocol for row in signalling.messages] == ["MGCP", "MGCP", "H.248", "H.248"]


def test_quality_reports_are_taken_out_of_sip_bodies_once(read: Read) -> None:
    head = (
        "PUBLISH sip:collector@example.org SIP/2.0\nFrom: <sip:alice@example.org>;tag=1\nTo: <sip:proxy@example.org>\n"
    )
    head += "Call-ID: 1890463548\nCSeq: 4331 PUBLISH\nEvent: vq-rtcpxr\nContent-Type: application/vq-rtcpxr"
    signalling = read([datagram(wire(head, RFC_6035_4_7_1))] * 2)
    (report,) = signalling.reports
    assert (report.call_id, report.source) == ("6dg37f1890463", f"{A}:5060")
    assert signalling.calls == []
    assert len(signalling.messages) == 2
