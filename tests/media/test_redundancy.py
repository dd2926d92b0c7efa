"""Redundant payloads (RFC 2198): the packets of the standards to the octet, and losses counted by hand."""

import random
import struct
from collections.abc import Sequence

import numpy as np
import pytest

from rtpaudit.media.events import telephone_events
from rtpaudit.media.streams import Content, Stream
from rtpaudit.signalling.payload_types import Encoding, encoding
from tests.craft import rtp
from tests.media.datagrams import Datagrams, talk

RED = 121
GIVEN = {RED: encoding("red", 8000), 101: encoding("telephone-event", 8000), 100: encoding("telephone-event", 8000)}


def red(primary: tuple[int, bytes], *copies: tuple[int, int, bytes]) -> bytes:
    """A redundant payload of (type, octets) with copies (type, timestamp offset, octets), the oldest first."""
    heads = b"".join(
        struct.pack("!I", 1 << 31 | number << 24 | offset << 10 | len(octets)) for number, offset, octets in copies
    )
    blocks = b"".join(octets for _, _, octets in copies)
    return heads + bytes([primary[0]]) + blocks + primary[1]


def content_of(number: int) -> bytes:
    return bytes([number % 250]) * 160


def redundant(numbers: Sequence[int], levels: Sequence[int] = (1,)) -> Datagrams:
    """PCMU of 20 ms in redundant packets, each with copies of those so many packets before it."""
    made = Datagrams()
    for number in numbers:
        copies = [(0, 160 * level, content_of(number - level)) for level in sorted(levels, reverse=True)]
        made.add(20.0 * number, rtp(red((0, content_of(number)), *copies), number, 160 * number, payload_type=RED))
    return made


def one(made: Datagrams) -> Stream:
    (stream,) = made.streams(GIVEN)
    return stream


def octets_of(made: Datagrams, packets, row: int) -> bytes:
    start = int(packets.start[row])
    return made.packets().octets[start : start + int(packets.captured[row])].tobytes()


def test_the_example_of_the_standard() -> None:
    """RFC 2198, 7: DVI4 of 84 octets, with an LPC block of 14 octets, 20 ms before it."""
    made = Datagrams()
    for number in range(6):
        payload = red((5, bytes([number]) * 84), (7, 160, bytes([0x40 + number]) * 14))
        made.add(20.0 * number, rtp(payload, number, 160 * number, payload_type=RED))
    del made.rows[3]
    stream = one(made)
    assert (stream.encoding, stream.clock_rate_hz, stream.payload_type) == ("DVI4", 8000, 5)
    assert set(stream.packets.length.tolist()) == {84}
    assert octets_of(made, stream.packets, 0) == bytes(84)
    lost = stream.recovered
    assert lost is not None
    assert (lost.sequence.tolist(), lost.payload_type.tolist(), lost.length.tolist()) == ([3], [7], [14])
    assert octets_of(made, lost, 0) == bytes([0x44]) * 14
    assert stream.encodings[7].name == "LPC"


def test_the_combined_payload_of_tones_and_events() -> None:
    """RFC 4733, 5, figure 5: tones of 160 ticks as primary, the event that began 1600 ticks before as copy."""
    event = bytes([1, 0x80 | 20]) + (1760).to_bytes(2, "big")
    tone = bytes([0, 20]) + (160).to_bytes(2, "big") + (697).to_bytes(2, "big") + (1209).to_bytes(2, "big")
    made = Datagrams()
    for sequence, ticks in ((16, 12000), (17, 12400), (18, 12800)):
        payload = red((103, tone), (100, ticks - 11200, event))
        made.add(ticks / 8.0, rtp(payload, sequence, ticks, ssrc=0x5234A8, payload_type=RED))
    (stream,) = made.streams(GIVEN | {103: encoding("tone", 8000)})
    (pressed,) = telephone_events(stream, [made.packets().octets])
    assert (pressed.digit, pressed.duration_ms, pressed.level_dbm0, pressed.end_seen) == ("1", 220.0, -20.0, True)
    assert pressed.begin_ticks == 11200 - 12000
    assert set(stream.packets.length.tolist()) == {8}


@pytest.mark.parametrize(
    ("levels", "lost", "recovered"),
    [
        ((1,), [10], [10]),
        ((1,), [10, 11], [11]),
        ((1, 2), [10, 11], [10, 11]),
        ((1, 2), [10, 11, 12], [11, 12]),
        ((2,), [10], [10]),
        ((2,), [10, 11], [10, 11]),
        ((2,), [10, 12], [12]),
        ((1, 3), [10, 11, 12], [10, 11, 12]),
        ((1,), [10, 20, 21, 30], [10, 21, 30]),
        ((1,), [], []),
    ],
)
def test_lost_packets_come_back_from_the_copies(levels: list[int], lost: list[int], recovered: list[int]) -> None:
    made = redundant([number for number in range(5, 40) if number not in lost], levels)
    stream = one(made)
    assert (stream.encoding, stream.packet_time_ms) == ("PCMU", 20.0)
    found = stream.recovered
    assert (sorted(found.extended.tolist()) if found is not None else []) == recovered
    for row, number in enumerate(found.extended.tolist() if found is not None else []):
        assert octets_of(made, found, row) == content_of(number)
        assert found.media_ticks[row] == 160 * (number - 5)
        assert found.timestamp[row] == 160 * number


def test_a_recovered_packet_comes_with_the_first_packet_that_copies_it() -> None:
    made = redundant([number for number in range(20) if number != 10], (1, 2))
    found = one(made).recovered
    assert found is not None
    assert found.frame.tolist() == [11]


def test_losses_at_the_begin_of_speech_are_known_by_their_place() -> None:
    """A pause of two seconds lies in the gap, so that the timestamp does not tell the number."""
    made = Datagrams()
    for number in range(30):
        ticks = 160 * number + (16_000 if number >= 15 else 0)
        before = 160 * (number - 1) + (16_000 if number - 1 >= 15 else 0)
        payload = red((0, content_of(number)), (0, min(ticks - before, 16383), content_of(number - 1)))
        if number != 15:
            made.add(ticks / 8.0, rtp(payload, number, ticks, payload_type=RED))
    found = one(made).recovered
    assert found is not None
    assert found.extended.tolist() == [15]


def test_a_late_packet_is_not_lost_and_needs_no_copy() -> None:
    made = redundant(range(30))
    made.rows.insert(15, made.rows.pop(12))
    assert one(made).recovered is None


def test_copies_of_packets_do_not_bring_anything_twice() -> None:
    made = redundant([number for number in range(20) if number != 10])
    made.rows += [(row[0] + 1.0, *row[1:]) for row in made.rows[8:12]]
    made.rows.sort()
    found = one(made).recovered
    assert found is not None
    assert len(found) == 1


def pressed(copies: int, lost: Sequence[int]) -> list:
    """Keys 4, 7 and 3, each told by five packets within audio, every packet with copies of the events before."""
    made = talk(range(10))
    told: list[tuple[int, bytes]] = []
    number = 10
    for code in (4, 7, 3):
        begin = 160 * number
        for k in range(5):
            event = bytes([code, (k >= 2) << 7 | 10]) + (160 * min(k + 1, 3)).to_bytes(2, "big")
            # RFC 4733, 2.6.2: the copies are the last reports of the events before.
            more = [(101, begin - ticks, octets) for ticks, octets in told[-copies:]] if copies else []
            if number not in lost:
                made.add(20.0 * number, rtp(red((101, event), *more), number, begin, payload_type=RED))
            number += 1
        told.append((begin, event))
        for _ in range(5):
            made.add(20.0 * number, rtp(content_of(number), number, 160 * number))
            number += 1
    (stream,) = made.streams(GIVEN)
    return telephone_events(stream, [made.packets().octets])


def test_a_digit_whose_packets_are_all_lost_is_told_by_the_copies() -> None:
    lost = range(20, 25)
    assert [one.digit for one in pressed(0, lost)] == ["4", "3"]
    found = pressed(1, lost)
    assert [(one.digit, one.packets, one.duration_ms, one.end_seen) for one in found] == [
        ("4", 5, 60.0, True),
        ("7", 0, 60.0, True),
        ("3", 5, 60.0, True),
    ]
    assert found[1].begin_ticks == 3200


@pytest.mark.parametrize("copies", [0, 1, 2])
def test_copies_of_digits_that_came_are_no_more_digits(copies: int) -> None:
    assert [(one.digit, one.packets) for one in pressed(copies, ())] == [("4", 5), ("7", 5), ("3", 5)]


def test_encrypted_payloads_are_left_alone() -> None:
    draw = random.Random(5)
    made = Datagrams()
    for number in range(200):
        made.add(20.0 * number, rtp(draw.randbytes(165), number, 160 * number, payload_type=RED))
    stream = one(made)
    assert stream.recovered is None
    assert (stream.packets.content == Content.REDUNDANT).all()
    assert set(stream.packets.length.tolist()) == {165}


@pytest.mark.parametrize("cut", range(0, 170, 7))
def test_a_packet_cut_anywhere_spoils_no_other(cut: int) -> None:
    made = redundant(range(30))
    at, payload, flow, interface = made.rows[12]
    made.rows[12] = (at, payload[: 12 + cut], flow, interface)
    stream = one(made)
    assert len(stream.packets) == 30
    whole = np.delete(stream.packets.length, 12)
    assert set(whole.tolist()) == {160}


def test_headers_that_never_end_are_no_redundancy() -> None:
    made = redundant(range(30))
    at, payload, flow, interface = made.rows[12]
    made.rows[12] = (at, payload[:12] + b"\x80\x02\x80\x01" * 60, flow, interface)
    stream = one(made)
    assert stream.packets.content[12] == Content.REDUNDANT


def test_noise_in_the_headers_never_points_outside_the_packet() -> None:
    draw = random.Random(7)
    made = redundant(range(300), (1, 2))
    for row in range(0, 300, 12):
        at, payload, flow, interface = made.rows[row]
        noisy = bytearray(payload)
        for place in range(12, 22):
            noisy[place] = draw.randrange(256)
        made.rows[row] = (at, bytes(noisy), flow, interface)
    del made.rows[5::7]
    for stream in made.streams(GIVEN):
        size = len(made.packets().octets)
        for packets in (stream.packets, stream.recovered):
            if packets is not None:
                assert (packets.start >= 0).all()
                assert (packets.length >= 0).all()
                assert (packets.start + packets.captured <= size).all()


def test_an_unknown_encoding_within_is_unknown() -> None:
    made = Datagrams()
    for number in range(50):
        payload = red((97, bytes([number]) * 40), (98, 160, bytes(20)))
        made.add(20.0 * number, rtp(payload, number, 160 * number, payload_type=RED))
    stream = one(made)
    assert stream.encoding == "unknown"
    assert stream.encodings[98] == Encoding("unknown", 8000, 0)
