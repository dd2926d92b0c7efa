"""The way of a batch: nothing read outside its frame, nothing lost uncounted, whatever the octets say."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.decode import Decoder, path
from rtpaudit.decode.layers import FRAGMENT, REASONS
from tests.craft import START_NS, rtp_frame
from tests.decode.made import decoded, frames_of, rows_of
from tests.decode.specimens import SPECIMENS

COMPILED = {name: specimen for name, specimen in SPECIMENS.items() if specimen[0] != 127}


@pytest.mark.parametrize("name", COMPILED)
def test_a_snap_length_anywhere_gives_the_same_packet_cut_or_counts_the_frame(name: str) -> None:
    link_type, frame = COMPILED[name]
    ((whole,), _) = decoded(frame, link_type=link_type)
    lengths = range(len(frame))
    rows, decoder = decoded(*(frame[:n] for n in lengths), link_type=link_type, originals=[len(frame)] * len(frame))
    for row in rows:
        if row.destination_port in (4789, 6081, 2152):
            continue  # too little of the tunnel's header to know it: the outer packet
        assert row == replace(whole, frame=row.frame, octets=whole.octets[: len(row.octets)], kind=row.kind)
        assert row.kind in (whole.kind, 0)
    assert len(rows) + sum(decoder.skipped.values()) == len(frame)
    assert set(decoder.skipped) <= {"headers cut by the snap length", "not IP"}
    header = {6: 20, 1: 8, 58: 8}.get(whole.protocol, 0)
    assert len(rows) >= whole.length - header, "every cut behind the headers leaves a packet"


@pytest.mark.parametrize("name", COMPILED)
def test_what_stands_behind_a_frame_does_not_matter(name: str) -> None:
    link_type, frame = COMPILED[name]
    seen = []
    for filler in (b"\0", b"\xff", b"\x45"):
        parts = [part for length in range(len(frame)) for part in (frame[:length], filler * 300)]
        batch = frames_of(parts, link_type)
        columns = ("start", "captured", "original", "time_ns", "interface")
        alone = replace(batch, **{column: getattr(batch, column)[::2] for column in columns})
        decoder = Decoder()
        seen.append((rows_of(decoder.decode(alone, "made.pcap"), decoder.flows), decoder.skipped))
    assert seen[0] == seen[1] == seen[2]


@given(
    link_type=st.sampled_from([0, 1, 9, 12, 50, 51, 101, 108, 113, 219, 276]),
    frames=st.lists(st.binary(max_size=120), max_size=20),
    more=st.integers(0, 2000),
)
def test_noise_is_counted_frame_by_frame_and_stays_within_its_frames(link_type, frames, more) -> None:
    batch = frames_of(frames, link_type, originals=[len(frame) + more for frame in frames])
    assert_all_counted(batch)


@given(
    name=st.sampled_from(sorted(COMPILED)),
    damage=st.lists(st.tuples(st.integers(0, 119), st.integers(0, 255)), min_size=1, max_size=6),
)
def test_damaged_headers_are_counted_and_stay_within_their_frames(name, damage) -> None:
    link_type, frame = COMPILED[name]
    octets = bytearray(frame)
    for place, value in damage:
        octets[place % len(octets)] = value
    assert_all_counted(frames_of([bytes(octets)], link_type))


def assert_all_counted(batch) -> None:
    decoder = Decoder()
    packets = decoder.decode(batch, "made.pcap")
    fragments = int(decoder._path.tally[FRAGMENT])
    assert sum(map(len, packets)) + sum(decoder.skipped.values()) + fragments == len(batch)
    assert set(decoder.skipped) <= set(REASONS.values())
    for one in packets:
        end = (batch.start + batch.captured)[one.frame - batch.first_number]
        assert (one.start >= batch.start[one.frame - batch.first_number]).all()
        assert (one.start + one.captured <= end).all()
        assert (one.captured <= one.length).all()
        assert (one.captured >= 0).all()


def test_an_empty_batch_and_an_empty_frame_are_nothing() -> None:
    assert Decoder().decode(frames_of([]), "made.pcap") == []
    assert decoded(b"")[1].skipped == {"malformed header": 1}


def test_frames_outside_their_octets_are_refused() -> None:
    batch = frames_of([rtp_frame(1)])
    for column, value in (("start", [1]), ("start", [-1]), ("captured", [10**6])):
        wrong = replace(
            batch, **{column: np.array(value, getattr(batch, column).dtype)}, original=batch.original * 9999
        )
        with pytest.raises(ValueError, match="outside its octets"):
            Decoder().decode(wrong, "made.pcap")


def test_a_batch_longer_than_a_chunk_keeps_order_numbers_and_times(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(path, "CHUNK", 64)
    frames = [rtp_frame(number) if number % 3 else b"\0" * 30 for number in range(1000)]
    decoder = Decoder()
    (packets,) = decoder.decode(frames_of(frames, first_number=501), "made.pcap")
    kept = np.array([number for number in range(1000) if number % 3])
    np.testing.assert_array_equal(packets.frame, 501 + kept)
    np.testing.assert_array_equal(packets.time_ns, START_NS + 20_000_000 * kept)
    sequence = packets.octets[packets.start + 2].astype(int) << 8 | packets.octets[packets.start + 3]
    np.testing.assert_array_equal(sequence, kept)


def test_columns_have_the_types_that_were_promised() -> None:
    (packets,) = Decoder().decode(frames_of([rtp_frame(1), b""]), "made.pcap")
    types = {name: getattr(packets, name).dtype for name in ("frame", "time_ns", "interface", "flow", "kind", "start")}
    assert types == {
        "frame": np.int64,
        "time_ns": np.int64,
        "interface": np.uint16,
        "flow": np.int32,
        "kind": np.uint8,
        "start": np.int64,
    }
    assert (packets.length.dtype, packets.captured.dtype) == (np.int32, np.int32)
    assert (packets.ip_id.dtype, packets.vlan.dtype) == (np.uint16, np.uint16)
    assert (packets.dscp.dtype, packets.ttl.dtype) == (np.uint8, np.uint8)
