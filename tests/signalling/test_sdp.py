import math
from contextlib import suppress

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.payload_types import STATIC, Encoding
from rtpaudit.signalling.sdp import Candidate, SessionDescription, parse_description

RFC_4566_5 = """
v=0
o=jdoe 2890844526 2890842807 IN IP4 192.0.2.5
s=SDP Seminar
i=A Seminar on the session description protocol
u=http://www.example.com/seminars/sdp.pdf
e=j.doe@example.com (Jane Doe)
c=IN IP4 233.252.0.12/127
t=2873397496 2873404696
a=recvonly
m=audio 49170 RTP/AVP 0
m=video 51372 RTP/AVP 99
a=rtpmap:99 h263-1998/90000
"""
RFC_3264_10_1_OFFER = """
v=0
o=alice 2890844526 2890844526 IN IP4 host.anywhere.example
s=
c=IN IP4 host.anywhere.example
t=0 0
m=audio 49170 RTP/AVP 0
a=rtpmap:0 PCMU/8000
m=video 51372 RTP/AVP 31
a=rtpmap:31 H261/90000
m=video 53000 RTP/AVP 32
a=rtpmap:32 MPV/90000
"""
RFC_4317_2_8_ANSWER = """
v=0
o=bob 2808844564 2808844564 IN IP4 host.biloxi.example.com
s=
c=IN IP4 host.biloxi.example.com
t=0 0
m=audio 49174 RTP/AVP 0
a=rtpmap:0 PCMU/8000
m=video 49172 RTP/AVP 32
c=IN IP4 otherhost.biloxi.example.com
a=rtpmap:32 MPV/90000
"""
HEAD = "v=0\no=- 1 1 IN IP4 192.0.2.10\ns=-\nc=IN IP4 192.0.2.10\nt=0 0\n"


def read(text: str) -> SessionDescription:
    return parse_description(text.lstrip("\n").replace("\n", "\r\n").encode())


def test_rfc_4566_section_5_example() -> None:
    seminar = read(RFC_4566_5)
    assert (seminar.origin.user, seminar.origin.session_id, seminar.origin.version) == (
        "jdoe",
        "2890844526",
        "2890842807",
    )
    assert (seminar.origin.address, seminar.name) == ("192.0.2.5", "SDP Seminar")
    audio, video = seminar.media
    assert (audio.kind, audio.port, audio.protocol, audio.address) == ("audio", 49170, "RTP/AVP", "233.252.0.12")
    assert audio.direction == video.direction == "recvonly"
    assert audio.encodings == {0: STATIC[0]}
    assert video.encodings == {99: Encoding("H263-1998", 90000, 0, media="video")}


def test_rfc_3264_10_1_two_video_streams_keep_their_ports() -> None:
    offer = read(RFC_3264_10_1_OFFER)
    assert [(one.kind, one.port) for one in offer.media] == [("audio", 49170), ("video", 51372), ("video", 53000)]
    assert offer.media[0].address == "host.anywhere.example"


def test_rfc_3264_10_1_a_declined_stream_has_port_zero_and_no_rtcp() -> None:
    answer = read(RFC_3264_10_1_OFFER.replace("video 51372", "video 0"))
    assert answer.media[1].port == answer.media[1].rtcp_port == 0
    assert answer.first("video") is answer.media[2]


def test_rfc_4317_2_8_video_may_go_to_an_address_of_its_own() -> None:
    assert [one.address for one in read(RFC_4317_2_8_ANSWER).media] == [
        "host.biloxi.example.com",
        "otherhost.biloxi.example.com",
    ]


def test_rfc_4317_2_3_a_dynamic_type_means_what_its_rtpmap_says() -> None:
    audio = read(HEAD + "m=audio 49170 RTP/AVP 0 8 97\na=rtpmap:97 iLBC/8000\n").media[0]
    assert audio.payload_types == (0, 8, 97)
    assert audio.encodings == {0: STATIC[0], 8: STATIC[8], 97: Encoding("iLBC", 8000, 8000)}


def test_a_dynamic_type_of_which_nothing_is_said_has_no_meaning() -> None:
    assert read(HEAD + "m=audio 49170 RTP/AVP 97\n").media[0].encodings == {}


def test_an_rtpmap_wins_over_the_static_table() -> None:
    audio = read(HEAD + "m=audio 49170 RTP/AVP 2\na=rtpmap:2 G726-32/8000\n").media[0]
    assert audio.encodings == {2: Encoding("G726-32", 8000, 8000)}


def test_rfc_4475_an_rtpmap_without_clock_rate_leaves_the_static_meaning() -> None:
    video = read(HEAD + "m =video 3227 RTP/AVP 31\na=rtpmap:31 LPC\n").media[0]
    assert video.encodings == {31: STATIC[31]}


def test_telephone_event_and_comfort_noise_are_found_by_name() -> None:
    text = "m=audio 4000 RTP/AVP 0 13 101\na=rtpmap:101 telephone-event/8000\na=fmtp:101 0-16\n"
    audio = read(HEAD + text).media[0]
    assert audio.types_of("telephone-event") == (101,)
    assert audio.types_of("CN") == (13,)
    assert audio.format_parameters == {101: "0-16"}


def test_a_type_left_out_of_the_media_line_but_mapped_is_kept() -> None:
    audio = read(HEAD + "m=audio 4000 RTP/AVP 0\na=rtpmap:101 telephone-event/8000\n").media[0]
    assert audio.payload_types == (0,)
    assert audio.types_of("telephone-event") == (101,)


def test_rfc_3605_2_1_rtcp_port_with_and_without_address() -> None:
    with_address = read(HEAD + "m=audio 49170 RTP/AVP 0\na=rtcp:53020 IN IP6 2001:DB8:0:0::20\n").media[0]
    assert (with_address.rtcp_address, with_address.rtcp_port) == ("2001:db8::20", 53020)
    without = read(HEAD + "m=audio 49170 RTP/AVP 0\na=rtcp:53020\n").media[0]
    assert (without.rtcp_address, without.rtcp_port) == ("192.0.2.10", 53020)


def test_rfc_3550_11_rtcp_is_one_port_above_where_nothing_is_said() -> None:
    assert read(HEAD + "m=audio 49170 RTP/AVP 0\n").media[0].rtcp_port == 49171


def test_rfc_5761_multiplexing_is_seen() -> None:
    assert read(HEAD + "m=audio 49170 RTP/AVP 0\na=rtcp-mux\n").media[0].rtcp_mux


@pytest.mark.parametrize("direction", ["sendrecv", "sendonly", "recvonly", "inactive"])
def test_direction_of_the_section_or_else_of_the_session(direction: str) -> None:
    assert read(HEAD + f"m=audio 4000 RTP/AVP 0\na={direction}\n").media[0].direction == direction
    assert read(HEAD + f"a={direction}\nm=audio 4000 RTP/AVP 0\n").media[0].direction == direction
    assert read(HEAD + f"a=inactive\nm=audio 4000 RTP/AVP 0\na={direction}\n").media[0].direction == direction


def test_rfc_3264_8_4_hold_by_direction_and_by_null_address() -> None:
    assert read(HEAD + "m=audio 4000 RTP/AVP 0\na=sendonly\n").media[0].held
    assert read(HEAD + "m=audio 4000 RTP/AVP 0\na=inactive\n").media[0].held
    assert read(HEAD + "m=audio 4000 RTP/AVP 0\nc=IN IP4 0.0.0.0\n").media[0].held
    assert not read(HEAD + "m=audio 4000 RTP/AVP 0\na=recvonly\n").media[0].held


def test_packet_times() -> None:
    audio = read(HEAD + "m=audio 4000 RTP/AVP 0\na=ptime:30\na=maxptime:120\n").media[0]
    assert (audio.packet_time_ms, audio.max_packet_time_ms) == (30.0, 120.0)
    assert math.isnan(read(HEAD + "m=audio 4000 RTP/AVP 0\na=ptime:0\n").media[0].packet_time_ms)


def test_rfc_4568_4_the_suite_of_a_crypto_line_is_kept_and_its_key_is_not() -> None:
    text = "m=audio 49170 RTP/SAVP 0\na=crypto:1 AES_CM_128_HMAC_SHA1_80 inline:QUJDREVGR0hJSktMTU5P|2^20\n"
    described = read(HEAD + text)
    assert described.media[0].crypto_suites == ("AES_CM_128_HMAC_SHA1_80",)
    assert described.media[0].encrypted
    assert "QUJD" not in repr(described)


def test_dtls_is_told_by_protocol_or_fingerprint() -> None:
    text = "a=fingerprint:sha-256 12:DF:3E\nm=audio 9 UDP/TLS/RTP/SAVPF 111\na=rtpmap:111 opus/48000/2\n"
    audio = read(HEAD + text).media[0]
    assert audio.fingerprint
    assert audio.encrypted
    assert audio.encodings == {111: Encoding("opus", 48000, 48000, 2)}


def test_ice_candidates_with_the_address_behind_them() -> None:
    text = (
        "m=audio 45664 RTP/AVP 0\n"
        "a=candidate:1 1 UDP 2130706431 2001:DB8::10 8998 typ host\n"
        "a=candidate:2 1 UDP 1694498815 192.0.2.3 45664 typ srflx raddr 192.0.2.10 rport 8998\n"
        "a=candidate:3 1 UDP one 192.0.2.3 99999 typ srflx\n"
    )
    assert read(HEAD + text).media[0].candidates == (
        Candidate(1, "udp", "2001:db8::10", 8998, "host"),
        Candidate(1, "udp", "192.0.2.3", 45664, "srflx", "192.0.2.10", 8998),
    )


def test_t_38_is_fax_and_has_no_payload_types() -> None:
    image = read(HEAD + "m=image 4000 udptl t38\na=T38FaxVersion:0\n").media[0]
    assert image.fax
    assert (image.protocol, image.payload_types, image.rtcp_port) == ("UDPTL", (), 0)


def test_a_media_line_without_a_port_is_passed_over() -> None:
    assert (
        read(HEAD + "m=audio $ RTP/AVP 0\nm=audio 70000 RTP/AVP 0\nm=audio\nm=audio 4000 RTP/AVP 8\n").media[0].port
        == 4000
    )


def test_a_body_that_describes_nothing_is_refused() -> None:
    for text in ("", "hello", "<xml/>", "a=sendrecv"):
        with pytest.raises(MalformedPacket):
            parse_description(text.encode())


EVERYTHING = HEAD + (
    "a=sendrecv\nm=audio 4000/2 RTP/SAVPF 0 8 96 101\na=rtpmap:96 opus/48000/2\na=fmtp:96 useinbandfec=1\n"
    "a=rtcp:4001 IN IP4 192.0.2.10\na=crypto:1 X inline:a\na=candidate:1 1 UDP 1 192.0.2.3 5 typ host\na=ptime:20\n"
)


@pytest.mark.parametrize("end", range(len(EVERYTHING)))
def test_every_prefix_is_read_or_refused(end: int) -> None:
    with suppress(MalformedPacket):
        parse_description(EVERYTHING[:end].encode())


@settings(max_examples=300)
@given(st.text(alphabet=st.sampled_from("avmcos=:/ \n0123456789$rtpmapcandidate\u0663"), max_size=300))
def test_noise_in_the_shape_of_lines_is_read_or_refused(text: str) -> None:
    with suppress(MalformedPacket):
        for section in parse_description(text.encode()).media:
            assert 0 <= section.port <= 65_535
            assert all(0 <= number <= 127 for number in section.encodings)


def test_a_flood_of_sections_and_attributes_is_bounded() -> None:
    text = HEAD + "m=audio 4000 RTP/AVP 0\na=candidate:1 1 UDP 1 192.0.2.3 5 typ host\n" * 1_500
    assert len(read(text).media) == 64
    with pytest.raises(MalformedPacket):
        parse_description(b"v=0\r\n" + b"a=x\r\n" * 100_000)
