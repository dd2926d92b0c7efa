"""TCP octets in order: hand-made connections, and any order of segments against the octets that were sent."""

import socket
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import dpkt
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.capture import open_recordings
from rtpaudit.decode import Decoder, tcp
from rtpaudit.decode.tcp import TcpChunk, TcpStreams
from rtpaudit.units import NS_PER_S
from tests import craft
from tests.craft import START_NS, ethernet, ipv4
from tests.decode.made import frames_of

SYN, FIN, ACK = 0x02, 0x11, 0x10


@dataclass(frozen=True)
class Segment:
    """A segment from port 5060 on, at a second of the capture."""

    sequence: int
    octets: bytes = b""
    flags: int = 0x18
    at_s: float = 0.0
    port: int = 5060

    def frame(self) -> bytes:
        return ethernet(
            ipv4(craft.tcp(self.octets, self.port, 5061, self.sequence % (1 << 32), self.flags), protocol=6)
        )


def is_sip(octets: bytes) -> bool:
    return octets.startswith((b"INVITE ", b"SIP/2.0 "))


def chunks_of(
    segments: Sequence[Segment], streams: TcpStreams | None = None, originals: Sequence[int] | None = None
) -> list[TcpChunk]:
    streams = streams or TcpStreams(is_sip)
    decoder = Decoder()
    frames = [segment.frame() for segment in segments]
    times_ns = [START_NS + round(segment.at_s * NS_PER_S) for segment in segments]
    chunks = []
    for packets in decoder.decode(frames_of(frames, times_ns=times_ns, originals=originals), "made.pcap"):
        chunks += streams.add(packets)
    return chunks + streams.finish()


def text(chunks: Sequence[TcpChunk]) -> bytes:
    return b"".join(chunk.octets for chunk in chunks)


def brief(chunks: Sequence[TcpChunk]) -> list[tuple[bytes, int, bool]]:
    return [(chunk.octets, chunk.frame, chunk.gap_before) for chunk in chunks]


def test_a_connection_seen_from_its_start_comes_in_order_without_gaps() -> None:
    segments = [Segment(99, flags=SYN), Segment(100, b"INVITE sip:"), Segment(111, b"b@192.0.2.20")]
    assert brief(chunks_of(segments)) == [(b"INVITE sip:", 2, False), (b"b@192.0.2.20", 3, False)]


def test_octets_that_waited_carry_the_arrival_of_the_segment_that_filled_the_hole() -> None:
    segments = [Segment(99, flags=SYN), Segment(107, b"sip:b", at_s=1), Segment(100, b"INVITE ", at_s=2)]
    chunks = chunks_of(segments)
    assert brief(chunks) == [(b"INVITE ", 3, False), (b"sip:b", 3, False)]
    assert {chunk.time_ns for chunk in chunks} == {START_NS + 2 * NS_PER_S}


def test_repeated_and_overlapping_segments_bring_each_octet_once() -> None:
    segments = [
        Segment(99, flags=SYN),
        Segment(99, flags=SYN),
        Segment(100, b"INVITE sip:"),
        Segment(100, b"INVITE sip:"),
        Segment(107, b"sip:b@192.0.2.20"),
        Segment(100, b"INV"),
    ]
    assert text(chunks_of(segments)) == b"INVITE sip:b@192.0.2.20"


def test_a_keep_alive_of_one_old_octet_changes_nothing() -> None:
    segments = [Segment(99, flags=SYN), Segment(100, b"INVITE "), Segment(106, b"\0"), Segment(107, b"sip:b")]
    assert text(chunks_of(segments)) == b"INVITE sip:b"


def test_a_hole_that_stays_is_a_gap_and_what_waited_keeps_its_own_arrival() -> None:
    segments = [
        Segment(99, flags=SYN),
        Segment(100, b"INVITE sip:b", at_s=0),
        Segment(200, b"Via: ", at_s=1),
        Segment(205, b"SIP/2.0/TCP", at_s=2),
    ]
    streams = TcpStreams(is_sip)
    chunks = chunks_of(segments, streams)
    assert brief(chunks) == [(b"INVITE sip:b", 2, False), (b"Via: ", 3, True), (b"SIP/2.0/TCP", 4, False)]
    assert [chunk.time_ns - START_NS for chunk in chunks] == [0, NS_PER_S, 2 * NS_PER_S]
    assert streams.gaps == 1


def test_a_hole_is_given_up_after_ten_seconds_of_capture_time() -> None:
    segments = [
        Segment(99, flags=SYN),
        Segment(100, b"INVITE sip:b"),
        Segment(200, b"Via: ", at_s=1),
        Segment(300, b"INVITE ", flags=0x18, port=7000, at_s=11.5),
        Segment(112, b"too late", at_s=12),
    ]
    chunks = chunks_of(segments)
    assert [(chunk.octets, chunk.gap_before) for chunk in chunks] == [
        (b"INVITE sip:b", False),
        (b"INVITE ", True),
        (b"Via: ", True),
    ]


def test_a_hole_is_given_up_when_too_much_waits_behind_it(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(tcp, "MAX_WAITING_OCTETS", 3000)
    segments = [Segment(99, flags=SYN), Segment(100, b"INVITE ")]
    segments += [Segment(200 + 1000 * number, bytes([65 + number]) * 1000) for number in range(6)]
    decoder, streams = Decoder(), TcpStreams(is_sip)
    chunks = []
    for packets in decoder.decode(frames_of([segment.frame() for segment in segments]), "made.pcap"):
        chunks += streams.add(packets)
    assert len(text(chunks)) == 7 + 6000
    assert [chunk.gap_before for chunk in chunks] == [False, True] + [False] * 5


def test_sequence_numbers_wrap() -> None:
    start = (1 << 32) - 5
    segments = [Segment(start - 1, flags=SYN), Segment(start + 7, b"sip:b"), Segment(start, b"INVITE ")]
    segments.append(Segment(start + 12, b"@192.0.2.20"))
    assert brief(chunks_of(segments)) == [
        (b"INVITE ", 3, False),
        (b"sip:b", 3, False),
        (b"@192.0.2.20", 4, False),
    ]


def test_a_capture_that_starts_in_the_middle_is_followed_from_the_first_message_start() -> None:
    segments = [Segment(5000, b"m=audio 4000 RTP/AVP 0\r\n"), Segment(5024, b"SIP/2.0 200 OK\r\n")]
    assert brief(chunks_of(segments)) == [(b"SIP/2.0 200 OK\r\n", 2, True)]


def test_a_direction_without_interest_is_left_alone_after_its_first_octets() -> None:
    hello = b"\x16\x03\x01" + bytes(60)
    segments = [Segment(99, flags=SYN), Segment(100, hello), Segment(100 + len(hello), b"INVITE sip:b@192.0.2.20")]
    assert chunks_of(segments) == []


def test_a_direction_met_in_the_middle_is_left_alone_after_a_few_segments() -> None:
    noise = [Segment(5000 + 20 * number, bytes(20)) for number in range(tcp.TRIALS)]
    late = Segment(5000 + 20 * tcp.TRIALS, b"SIP/2.0 200 OK\r\n")
    assert chunks_of([*noise, late]) == []
    assert text(chunks_of([*noise[:-1], Segment(noise[-1].sequence, late.octets)])) == late.octets


def test_a_first_segment_of_one_octet_does_not_decide() -> None:
    segments = [Segment(99, flags=SYN), Segment(100, b"I"), Segment(101, b"NVITE sip:b")]
    assert text(chunks_of(segments)) == b"INVITE sip:b"


def test_empty_lines_that_keep_a_connection_alive_do_not_decide() -> None:
    segments = [Segment(99, flags=SYN), Segment(100, b"\r\n\r\n"), Segment(104, b"INVITE sip:b")]
    assert text(chunks_of(segments)) == b"\r\n\r\nINVITE sip:b"


def test_a_new_connection_between_the_same_ports_starts_anew() -> None:
    segments = [
        Segment(99, flags=SYN),
        Segment(100, b"INVITE sip:b"),
        Segment(3_000_000_000, flags=SYN),
        Segment(3_000_000_001, b"SIP/2.0 200 OK"),
    ]
    assert brief(chunks_of(segments)) == [(b"INVITE sip:b", 2, False), (b"SIP/2.0 200 OK", 4, False)]


def test_a_new_connection_gives_a_refused_direction_another_chance() -> None:
    segments = [
        Segment(99, flags=SYN),
        Segment(100, bytes(40)),
        Segment(3_000_000_000, flags=SYN),
        Segment(3_000_000_001, b"INVITE sip:b"),
    ]
    assert text(chunks_of(segments)) == b"INVITE sip:b"


def test_a_jump_without_a_syn_is_another_connection() -> None:
    segments = [Segment(100, b"INVITE sip:b"), Segment(2_000_000_000, b"SIP/2.0 200 OK")]
    assert brief(chunks_of(segments)) == [(b"INVITE sip:b", 1, True), (b"SIP/2.0 200 OK", 2, True)]


def test_octets_cut_by_a_snap_length_leave_a_gap() -> None:
    segments = [Segment(99, flags=SYN), Segment(100, b"INVITE "), Segment(117, b"Via: ")]
    frames = [segment.frame() for segment in segments]
    longer = bytearray(frames[1])
    longer[16:18] = (20 + 20 + 17).to_bytes(2, "big")  # ten octets more than the capture holds
    decoder, streams = Decoder(), TcpStreams(is_sip)
    batch = frames_of(
        [frames[0], bytes(longer), frames[2]], originals=[len(frames[0]), len(longer) + 10, len(frames[2])]
    )
    chunks = [chunk for packets in decoder.decode(batch, "made.pcap") for chunk in streams.add(packets)]
    assert brief(chunks) == [(b"INVITE ", 2, False), (b"Via: ", 3, True)]


def test_more_directions_than_are_followed_push_out_those_on_trial(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(tcp, "MAX_DIRECTIONS", 2)
    streams = TcpStreams(is_sip)
    segments = [
        Segment(1, b"?", port=1),
        Segment(1, b"INVITE a", port=2),
        Segment(1, b"INVITE b", port=3),
        Segment(1, b"INVITE c", port=4),
    ]
    assert text(chunks_of(segments, streams)) == b"INVITE aINVITE b"
    assert streams.crowded == 1


@given(
    octets=st.binary(min_size=1, max_size=400),
    cuts=st.lists(st.integers(0, 400), max_size=12),
    repeats=st.lists(st.tuples(st.integers(0, 400), st.integers(1, 60)), max_size=8),
    seed=st.randoms(use_true_random=False),
    start=st.integers(0, (1 << 32) - 1),
)
def test_any_order_of_any_segments_gives_the_octets_that_were_sent(octets, cuts, repeats, seed, start) -> None:
    octets = b"INVITE " + octets
    places = sorted({0, len(octets), *(min(cut, len(octets)) for cut in cuts)})
    pieces = list(pairwise(places))
    pieces += [(first, min(first + count, len(octets))) for first, count in repeats if first < len(octets)]
    seed.shuffle(pieces)
    segments = [Segment(start - 1, flags=SYN)]
    segments += [Segment(start + first, octets[first:last]) for first, last in pieces]
    chunks = chunks_of(segments)
    assert text(chunks) == octets
    assert not any(chunk.gap_before for chunk in chunks)
    assert [chunk.frame for chunk in chunks] == sorted(chunk.frame for chunk in chunks)


@given(
    st.lists(
        st.tuples(st.integers(0, (1 << 32) - 1), st.binary(max_size=40), st.integers(0, 255), st.integers(0, 3)),
        max_size=40,
    )
)
def test_noise_never_breaks_it_and_nothing_is_held_in_the_end(rows) -> None:
    streams = TcpStreams(lambda octets: octets[0] & 1 == 0)
    chunks_of([Segment(sequence, octets, flags, port=port) for sequence, octets, flags, port in rows], streams)
    assert streams._held == 0
    assert not streams._waiting


def test_a_batch_without_tcp_gives_nothing() -> None:
    decoder, streams = Decoder(), TcpStreams(is_sip)
    for packets in decoder.decode(frames_of([craft.rtp_frame(1)]), "made.pcap"):
        assert streams.add(packets) == []
        assert np.all(packets.kind != 7)


def sent_by_sequence(capture: Path) -> dict[tuple[str, int], bytes]:
    """Octets of each source by dpkt: segments sorted by sequence number, for a capture without loss or wrap."""
    pieces: dict[tuple[str, int], dict[int, bytes]] = {}
    with capture.open("rb") as file:
        for _, octets in dpkt.pcap.Reader(file):
            packet = dpkt.ethernet.Ethernet(octets).data
            segment = getattr(packet, "data", None)
            if isinstance(segment, dpkt.tcp.TCP) and segment.data:
                source = (socket.inet_ntoa(packet.src), segment.sport)
                pieces.setdefault(source, {})[segment.seq] = segment.data
    return {source: b"".join(parts[seq] for seq in sorted(parts)) for source, parts in pieces.items()}


@pytest.mark.parametrize("name", ["sip-tcp.a.pcap", "sip-tcp-split-segments.pcap"])
def test_recorded_signalling_comes_whole(name: str) -> None:
    capture = Path(__file__).parents[2] / "fixtures" / "captures" / name
    decoder = Decoder()
    streams = TcpStreams(lambda octets: octets.split(b" ")[0] in (b"INVITE", b"SIP/2.0", b"ACK", b"BYE", b"OPTIONS"))
    chunks: list[TcpChunk] = []
    for recording in open_recordings([capture]):
        for file in recording.files:
            for frames in file.batches():
                for packets in decoder.decode(frames, file.name):
                    chunks += streams.add(packets)
    chunks += streams.finish()
    flows = decoder.flows
    ours = {
        (flows.source_text(flow), int(flows.source_port[flow])): text([one for one in chunks if one.flow == flow])
        for flow in {chunk.flow for chunk in chunks}
    }
    assert ours == sent_by_sequence(capture)
    assert len(ours) >= 2
