"""Which UDP is RTP, and what its payload types mean."""

import random

import numpy as np
import pytest

from rtpaudit.media.calls import pair_streams
from rtpaudit.media.streams import Content
from rtpaudit.signalling.payload_types import Encoding
from tests.craft import rtp
from tests.media.datagrams import MS, START_MS, Datagrams, joined, packet, talk
from tests.media.made_calls import party, sip_call


def test_three_packets_are_a_stream():
    (stream,) = talk(range(3)).streams()
    assert (stream.encoding, stream.packet_time_ms, stream.clock_basis) == ("PCMU", 20.0, "static")


def test_the_ssrc_may_be_zero():
    (stream,) = talk(range(5), ssrc=0).streams()
    assert stream.ssrc == 0


def test_strangers_may_share_an_ssrc():
    assert len(joined(talk(range(5)), talk(range(70, 80), flow=2)).streams()) == 2


def test_random_octets_are_no_stream():
    noise = random.Random(7)
    made = Datagrams()
    for turn in range(3000):
        made.add(turn, bytes([0x80 | noise.randrange(16) * 0]) + noise.randbytes(60))
    assert made.streams() == []


def test_a_counter_under_a_fixed_header_is_no_stream():
    made = Datagrams()
    for turn in range(200):
        made.add(5.0 * turn, b"\x80\x01" + turn.to_bytes(2, "big") + bytes(8) + b"state of the game")
    assert made.streams() == []


@pytest.mark.parametrize("ticks_per_s", [1, 60, 1000, 1_000_000])
@pytest.mark.parametrize("payload_type", [0, 5, 35, 111])
def test_a_counter_beside_a_clock_that_is_no_media_clock_is_no_stream(ticks_per_s, payload_type):
    made = Datagrams()
    for turn in range(600):
        made.add(16.0 * turn, rtp(bytes(40), turn, 16 * turn * ticks_per_s // 1000, payload_type=payload_type))
    assert made.streams() == []


@pytest.mark.parametrize("factor", [0.5, 2])
def test_a_timestamp_that_counts_at_half_or_twice_the_rate_is_still_a_stream(factor):
    assert len(talk(range(600), step=round(160 * factor)).streams()) == 1


def test_a_timestamp_that_jumps_by_hours_is_still_a_stream():
    made = joined(talk(range(60)), talk(range(60, 120), start_ms=1200.0, first_ticks=400_000_000))
    assert [len(one.packets) for one in made.streams()] == [120]


def test_a_third_lost_at_random_is_still_a_stream():
    draw = random.Random(3)
    (stream,) = talk([number for number in range(60) if draw.random() > 0.34]).streams()
    assert stream.packet_time_ms == 20.0


def test_every_second_packet_lost_is_still_a_stream():
    assert len(talk(range(0, 60, 2)).streams()) == 1


def test_csrc_list_extension_and_padding_are_no_payload():
    made = Datagrams()
    for n in range(12):
        full = rtp(bytes(160), n, 160 * n, csrcs=(1, 2), extension=(0xBEDE, b"\x10\x01\x00\x00"), padding=4)
        made.add(20.0 * n, full)
    (stream,) = made.streams()
    assert set(stream.packets.length.tolist()) == {160}


def test_packets_of_thirty_ms_are_seen_in_the_data():
    made = Datagrams()
    for n in range(20):
        made.add(30.0 * n, rtp(bytes(240), n, 240 * n, payload_type=8))
    (stream,) = made.streams()
    assert (stream.encoding, stream.packet_time_ms) == ("PCMA", 30.0)


def test_the_clock_of_a_dynamic_type_is_inferred_and_said_to_be():
    made = Datagrams()
    for n in range(100):
        made.add(20.0 * n, rtp(bytes(70), n, 960 * n, payload_type=111))
    (stream,) = made.streams()
    assert (stream.encoding, stream.clock_rate_hz, stream.clock_basis) == ("unknown", 48000, "inferred")
    assert stream.packet_time_ms == 20.0


def test_a_change_to_a_type_of_another_clock_is_followed():
    made = talk(range(100))
    for n in range(100, 150):
        made.add(20.0 * n, rtp(bytes(70), n, 960 * n, payload_type=111))
    (stream,) = made.streams()
    assert (stream.payload_type, stream.clock_rate_hz) == (0, 8000)
    assert stream.encodings[111].clock_rate_hz == 48000


def test_the_users_word_on_a_payload_type_counts():
    made = Datagrams()
    for n in range(100):
        made.add(20.0 * n, rtp(bytes(160), n, 160 * n, payload_type=97))
    (stream,) = made.streams({97: Encoding("G722", 8000, 16000)})
    assert (stream.encoding, stream.sampling_rate_hz, stream.clock_basis) == ("G722", 16000, "given")


def test_telephone_events_are_kept_apart_from_audio():
    made = talk(range(20))
    for n in range(20, 26):
        event = bytes([5, 10]) + (160 * (n - 19)).to_bytes(2, "big")
        made.add(20.0 * n, rtp(event, n, 3200, payload_type=101))
    made.rows += talk(range(26, 40), start_ms=520.0, first_ticks=160 * 26).rows
    (stream,) = made.streams()
    assert stream.encodings[101].name == "telephone-event"
    assert (stream.packets.content == Content.EVENT).sum() == 6
    assert stream.payload_type == 0


def test_comfort_noise_is_kept_apart_from_audio():
    made = talk(range(20))
    made.add(400.0, rtp(bytes([40]), 20, 3200, payload_type=13))
    (stream,) = made.streams()
    assert stream.packets.content[-1] == Content.COMFORT_NOISE


def test_video_is_listed_and_makes_no_call():
    made = Datagrams()
    for n in range(90):
        made.add(n // 3 * 33.3, rtp(bytes(1100), n, n // 3 * 3000, payload_type=102, marker=n % 3 == 2))
    streams = made.streams()
    assert [one.media for one in streams] == ["video"]
    assert pair_streams(streams) == []


def test_an_authentication_tag_does_not_lengthen_the_packet_time():
    made = Datagrams()
    for n in range(30):
        made.add(20.0 * n, rtp(bytes(170), n, 160 * n))
    (stream,) = made.streams()
    assert stream.packet_time_ms == 20.0


def test_two_directions_are_one_call_and_the_first_packet_names_the_caller():
    streams = joined(talk(range(50)), talk(range(900, 940), start_ms=100.0, flow=1, ssrc=9)).streams()
    (call,) = pair_streams(streams)
    assert (call.caller, call.callee) == ("192.0.2.1", "198.51.100.1")
    assert [one.match_basis for one in streams] == ["mirror", "mirror"]


def test_streams_that_follow_after_ten_seconds_are_two_calls():
    near = joined(talk(range(50)), talk(range(50), start_ms=10_900.0, flow=1, ssrc=9)).streams()
    far = joined(talk(range(50)), talk(range(50), start_ms=11_100.0, flow=1, ssrc=9)).streams()
    assert (len(pair_streams(near)), len(pair_streams(far))) == (1, 2)


def test_interfaces_of_one_file_are_merged_by_time():
    made = Datagrams()
    for n in (*range(0, 40, 2), *range(1, 40, 2)):
        made.add(20.0 * n, packet(n, 160 * n), interface=n % 2)
    (stream,) = made.streams()
    assert stream.packets.extended.tolist() == list(range(40))
    assert (np.diff(stream.packets.time_ns) > 0).all()


def test_a_restart_is_a_new_stream_under_a_new_dialog_alone():
    made = joined(talk(range(100)), talk(range(30_000, 30_100), start_ms=5000.0, first_ticks=9_000_000))
    begun_ns = round((START_MS + 4000) * MS)
    first = sip_call("one@example.com", party("0142", "192.0.2.1"), party("0199", "198.51.100.1"))
    second = sip_call("two@example.com", party("0142", "192.0.2.1"), party("0199", "198.51.100.1"), started_ns=begun_ns)
    two = made.streams(dialog_of=lambda flow, time_ns: second if time_ns > begun_ns else first)
    assert [(len(one.packets), one.packets.segment.max()) for one in two] == [(100, 0), (100, 0)]
    (one,) = made.streams(dialog_of=lambda flow, time_ns: first)
    assert one.packets.segment.max() == 1
