"""Fragments put together, by hand and in any order."""

from collections.abc import Sequence
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.decode import Decoder, fragments
from rtpaudit.units import NS_PER_S
from tests.craft import START_NS, ethernet, ipv4, ipv6, udp
from tests.decode.made import Row, decoded, frames_of, rows_of
from tests.decode.specimens import fragment_header, gre, options_header

TEXT = bytes(range(32, 127)) * 30
DATAGRAM = udp(TEXT, 5060, 5062)


def four(
    first: int, last: int, *, identification: int = 7, more: bool | None = None, octets: bytes = DATAGRAM
) -> bytes:
    """An IPv4 fragment of the datagram, octets ``first`` to ``last``."""
    more = last < len(octets) if more is None else more
    return ethernet(
        ipv4(
            octets[first:last],
            dscp=24,
            ttl=61,
            identification=identification,
            fragment_offset=first,
            more_fragments=more,
        )
    )


def six(first: int, last: int, *, more: bool | None = None) -> bytes:
    """An IPv6 fragment of the datagram behind a hop-by-hop header."""
    more = last < len(DATAGRAM) if more is None else more
    piece = fragment_header(17, first, more, 0xABCD0007) + DATAGRAM[first:last]
    return ethernet(ipv6(options_header(44) + piece, next_header=0, dscp=24, hop_limit=61), 0x86DD)


def decode(frames: Sequence[bytes], at_s: Sequence[float] | None = None) -> tuple[list[Row], Decoder]:
    decoder = Decoder()
    times = None if at_s is None else [START_NS + round(second * NS_PER_S) for second in at_s]
    batches = decoder.decode(frames_of(frames, times_ns=times), "made.pcap") + decoder.finish()
    return rows_of(batches, decoder.flows), decoder


def only(rows: list[Row]) -> Row:
    (row,) = rows
    return row


THREE = ((0, 1000), (1000, 2000), (2000, len(DATAGRAM)))


@pytest.mark.parametrize("piece", [four, six])
@pytest.mark.parametrize("order", [(0, 1, 2), (2, 1, 0), (1, 2, 0), (1, 0, 2)])
def test_a_datagram_is_whole_with_its_last_fragment_in_any_order(piece, order) -> None:
    rows, decoder = decode([piece(*THREE[part]) for part in order])
    row = only(rows)
    assert (row.frame, row.octets, row.length) == (3, TEXT, len(TEXT))
    assert (row.source_port, row.destination_port, row.dscp, row.ttl, row.ip_id) == (5060, 5062, 24, 61, 7)
    assert decoder.damage == []
    assert decoder.skipped == {}


def test_a_datagram_arrives_with_the_frame_that_completes_it() -> None:
    decoder = Decoder()
    frames = [four(*THREE[0]), four(*THREE[1]), ethernet(ipv4(udp(b"between"))), four(*THREE[2])]
    plain, whole = decoder.decode(frames_of(frames), "made.pcap")
    assert plain.frame.tolist() == [3]
    assert whole.frame.tolist() == [4]
    assert whole.time_ns.tolist() == [START_NS + 60_000_000]
    assert whole.octets is not plain.octets


def test_fragments_go_on_in_the_next_batch() -> None:
    decoder = Decoder()
    assert decoder.decode(frames_of([four(*THREE[0])]), "made.pcap") == []
    assert decoder.decode(frames_of([four(*THREE[1])], first_number=2), "made.pcap") == []
    (whole,) = decoder.decode(frames_of([four(*THREE[2])], first_number=3), "made.pcap")
    assert whole.frame.tolist() == [3]


def test_copies_of_fragments_change_nothing() -> None:
    rows, decoder = decode([four(*THREE[0]), four(*THREE[0]), four(*THREE[1]), four(*THREE[2]), four(*THREE[2])])
    assert only(rows).octets == TEXT
    assert decoder.damage == []


def test_a_datagram_doubled_by_a_mirror_port_comes_twice() -> None:
    once = [four(*part) for part in THREE]
    rows, decoder = decode(once + once)
    assert [(row.frame, row.octets) for row in rows] == [(3, TEXT), (6, TEXT)]
    assert decoder.damage == []


@pytest.mark.parametrize("piece", [four, six])
def test_an_overlap_drops_the_whole_datagram(piece) -> None:
    rows, decoder = decode([piece(*THREE[0]), piece(992, 2000), piece(*THREE[2])])
    assert rows == []
    (damage,) = decoder.damage
    assert damage.offset == 0
    assert damage.what.startswith("1 datagrams")


def test_a_missing_fragment_is_damage_and_never_a_packet() -> None:
    rows, decoder = decode([ethernet(ipv4(udp(b"x"))), four(*THREE[0]), four(*THREE[2])])
    assert [row.octets for row in rows] == [b"x"]
    (damage,) = decoder.damage
    assert damage.offset == 14 + 20 + 8 + 1
    assert damage.capture == "made.pcap"


def test_a_fragment_after_half_a_minute_belongs_to_another_datagram() -> None:
    at_s = [0.0, 31.0, 31.1, 31.2]
    rows, decoder = decode([four(*THREE[0]), four(*THREE[1]), four(*THREE[2]), four(*THREE[0])], at_s)
    assert only(rows).frame == 4
    assert decoder.damage[0].what.startswith("1 datagrams")


def test_other_identifications_and_protocols_are_kept_apart() -> None:
    frames = [four(*THREE[0]), four(*THREE[1], identification=8), four(*THREE[2])]
    assert decode(frames)[0] == []


def test_a_cut_fragment_leaves_the_length_and_what_was_held_before_the_cut() -> None:
    frames = [four(*part) for part in THREE]
    cut = frames[1][: 14 + 20 + 400]
    rows, _ = decoded(frames[0], cut, frames[2], originals=[len(frame) for frame in frames])
    row = only(rows)
    assert (row.length, row.octets) == (len(TEXT), TEXT[: 1000 - 8 + 400])


def test_a_tunnel_in_fragments_is_entered_and_fragments_in_a_tunnel_are_put_together() -> None:
    inner = ipv4(DATAGRAM)
    carrier = gre(0, 0x0800, b"", inner)[20:]
    pieces = [
        ethernet(ipv4(carrier[:1400], protocol=47, identification=1, more_fragments=True)),
        ethernet(ipv4(carrier[1400:], protocol=47, identification=1, fragment_offset=1400)),
    ]
    assert only(decode(pieces)[0]).octets == TEXT
    tunnelled = [ethernet(gre(0, 0x0800, b"", four(*part)[14:])) for part in THREE]
    assert only(decode(tunnelled)[0]).octets == TEXT


def test_fragments_within_fragments_end_somewhere() -> None:
    packet = ipv4(DATAGRAM)
    for identification in range(8):
        carrier = gre(0, 0x0800, b"", packet)[20:]
        packets = [
            ipv4(carrier[:400], protocol=47, identification=identification, more_fragments=True),
            ipv4(carrier[400:], protocol=47, identification=identification, fragment_offset=400),
        ]
        packet = packets[1]
    rows, decoder = decode([ethernet(packets[0]), ethernet(packets[1])])
    assert rows == []
    assert len(decoder.damage) <= 1


def test_a_datagram_longer_than_ip_allows_is_dropped() -> None:
    big = bytes(70_000)
    pieces = [four(first, first + 8000, octets=big) for first in range(0, 64_000, 8000)]
    pieces.append(four(64_000, 65_528, octets=big, more=False))
    rows, decoder = decode(pieces)
    assert rows == []
    assert len(decoder.damage) == 1


def test_too_many_open_datagrams_push_out_the_oldest(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(fragments, "MAX_OPEN", 3)
    frames = [four(*THREE[0], identification=number) for number in range(5)]
    frames += [four(*part, identification=4) for part in THREE[1:]]
    frames += [four(*part, identification=0) for part in THREE[1:]]
    rows, decoder = decode(frames)
    assert [row.ip_id for row in rows] == [4]
    assert len(decoder._path.fragments.opened) == 0
    assert decoder.damage[0].what.startswith("5 datagrams"), "two pushed out, two left, and the rest of the first one"


def test_octets_held_are_bounded(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(fragments, "MAX_OCTETS", 20_000)
    decoder = Decoder()
    frames = [four(0, 2000, identification=number, more=True) for number in range(200)]
    decoder.decode(frames_of(frames), "made.pcap")
    assert 0 < decoder._path.fragments.held <= 20_000 + 3024
    decoder.finish()
    assert decoder._path.fragments.held == 0


def test_a_fragment_whose_length_is_no_multiple_of_eight_spoils_its_datagram() -> None:
    assert decode([four(0, 1001, more=True), four(1008, len(DATAGRAM))])[0] == []


@given(
    cuts=st.lists(st.integers(1, len(DATAGRAM) // 8), max_size=20),
    copies=st.lists(st.integers(0, 20), max_size=5),
    seed=st.randoms(use_true_random=False),
    version=st.sampled_from([four, six]),
)
def test_any_cuts_in_any_order_with_copies_give_the_datagram(cuts, copies, seed, version) -> None:
    places = sorted({0, len(DATAGRAM), *(8 * cut for cut in cuts if 8 * cut < len(DATAGRAM))})
    parts = list(pairwise(places))
    parts += [parts[copy] for copy in copies if copy < len(parts)]
    if len(parts) == 1:
        return
    seed.shuffle(parts)
    rows, decoder = decode([version(*part, more=part[1] < len(DATAGRAM)) for part in parts])
    assert rows[0].octets == TEXT
    assert decoder.damage == []


@given(
    st.lists(
        st.tuples(st.integers(0, 8191), st.integers(0, 60), st.booleans(), st.integers(0, 1), st.booleans()),
        max_size=30,
    )
)
def test_any_fragments_are_taken_without_harm(pieces) -> None:
    frames = []
    for place, length, more, identification, is_six in pieces:
        octets = bytes(length)
        if is_six:
            head = fragment_header(17, 8 * place, more, identification)
            frames.append(ethernet(ipv6(head + octets, next_header=44), 0x86DD))
        else:
            packet = ipv4(octets, identification=identification, fragment_offset=8 * place, more_fragments=more)
            frames.append(ethernet(packet))
    _, decoder = decode(frames)
    assert decoder._path.fragments.held == 0
    assert len(decoder.damage) <= 1
