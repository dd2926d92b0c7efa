"""IP headers, by hand."""

import csv
import struct
from pathlib import Path

import pytest

from tests.craft import A6, B6, A, B, ethernet, ipv4, ipv6, tcp, udp
from tests.decode.made import Row, decoded
from tests.decode.specimens import DATAGRAM, FOUR, SIX, SOUND, fragment_header, options_header


def only(rows: list[Row]) -> Row:
    (row,) = rows
    return row


def with_total_length(packet: bytes, length: int) -> bytes:
    return packet[:2] + struct.pack("!H", length) + packet[4:]


def test_marking_hops_and_identification_come_with_an_ipv4_packet() -> None:
    row = only(decoded(ethernet(ipv4(DATAGRAM, dscp=46, ttl=57, identification=0xBEEF)))[0])
    assert (row.dscp, row.ttl, row.ip_id) == (46, 57, 0xBEEF)
    assert (row.source, row.destination) == (A, B)


def test_marking_and_hops_come_with_an_ipv6_packet() -> None:
    row = only(decoded(ethernet(ipv6(DATAGRAM, dscp=34, hop_limit=57), 0x86DD))[0])
    assert (row.dscp, row.ttl, row.ip_id) == (34, 57, 0)
    assert (row.source, row.destination) == (A6, B6)


def test_congestion_bits_are_no_marking() -> None:
    packet = bytearray(FOUR)
    packet[1] |= 3
    assert only(decoded(ethernet(bytes(packet)))[0]).dscp == 46


def test_a_bad_header_checksum_drops_nothing() -> None:
    packet = bytearray(FOUR)
    packet[10] ^= 0xFF
    assert only(decoded(ethernet(bytes(packet)))[0]).octets == SOUND


def test_a_total_length_of_zero_goes_by_the_frame() -> None:
    """Segmentation offload: the capturing host sees the packet before its length is set."""
    assert only(decoded(ethernet(with_total_length(FOUR, 0)))[0]).octets == SOUND
    six = SIX[:4] + b"\0\0" + SIX[6:]
    assert only(decoded(ethernet(six, 0x86DD))[0]).octets == SOUND


def test_a_total_length_beyond_the_frame_goes_by_the_frame() -> None:
    segment = ipv4(tcp(b"x" * 100, 5060, 5061, 1), protocol=6)
    row = only(decoded(ethernet(with_total_length(segment, 9000)))[0])
    assert row.length == 120


def test_a_snap_length_cuts_what_is_held_and_not_the_length() -> None:
    frame = ethernet(FOUR)
    row = only(decoded(frame[:60], originals=[len(frame)])[0])
    assert row.length == len(SOUND)
    assert row.octets == SOUND[:18]


REFUSED = {
    "version 5": (0x0800, b"\x55" + FOUR[1:], "malformed header"),
    "version 4 under the EtherType of IPv6": (0x86DD, b"\x45" + SIX[1:], "malformed header"),
    "a header of 16 octets": (0x0800, b"\x44" + FOUR[1:], "malformed header"),
    "a total length shorter than the header": (0x0800, with_total_length(FOUR, 19), "malformed header"),
    "a total length without room for UDP": (0x0800, with_total_length(FOUR, 27), "malformed header"),
    "an extension header beyond the packet": (
        0x86DD,
        ipv6(bytes([17, 200]) + bytes(30), next_header=0),
        "malformed header",
    ),
    "no next header": (0x86DD, ipv6(bytes(30), next_header=59), "IP without UDP, TCP or ICMP"),
    "SCTP": (0x0800, ipv4(bytes(30), protocol=132), "IP without UDP, TCP or ICMP"),
    "IP in IP without end": (0x0800, ipv4(b"", protocol=4), "malformed header"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_header_that_cannot_be_is_counted(name: str) -> None:
    ether_type, packet, reason = REFUSED[name]
    rows, decoder = decoded(ethernet(packet, ether_type))
    assert rows == []
    assert decoder.skipped == {reason: 1}


def test_nesting_without_end_is_left_out() -> None:
    packet = FOUR
    for _ in range(60):
        packet = ipv4(packet, protocol=4)
    assert decoded(ethernet(packet))[1].skipped == {"too many headers inside each other": 1}
    headers = b"".join(options_header(60) for _ in range(60)) + options_header(17) + DATAGRAM
    assert decoded(ethernet(ipv6(headers, next_header=60), 0x86DD))[1].skipped == {
        "too many headers inside each other": 1
    }


def test_a_whole_datagram_with_a_fragment_header_keeps_its_identification() -> None:
    packet = ipv6(fragment_header(17, 0, False, 0xABCD1234) + DATAGRAM, next_header=44)
    row = only(decoded(ethernet(packet, 0x86DD))[0])
    assert (row.ip_id, row.octets) == (0x1234, SOUND)


def test_two_packets_the_other_way_round_are_two_flows() -> None:
    rows, decoder = decoded(ethernet(ipv4(udp(b"1", 4000, 4002))), ethernet(ipv4(udp(b"2", 4002, 4000), B, A)))
    assert [(row.source, row.source_port) for row in rows] == [(A, 4000), (B, 4002)]
    assert len(decoder.flows) == 2


def published_marking() -> list[tuple[str, int, int]]:
    """Class, DSCP and TOS octet of the published table."""
    with (Path(__file__).parents[1] / "published" / "demux.csv").open() as file:
        rows = {row["id"]: row["expected"] for row in csv.DictReader(file)}
    names = [name.removeprefix("DSCP-") for name in rows if name.startswith("DSCP-")]
    return [(name, int(rows[f"DSCP-{name}"]), int(rows[f"TOS-{name}"], 16)) for name in names]


@pytest.mark.parametrize(("name", "dscp", "tos"), published_marking())
def test_the_marking_is_read_out_of_the_tos_octet(name: str, dscp: int, tos: int) -> None:
    """RFC 3246, RFC 4594, RFC 5865."""
    four = FOUR[:1] + bytes([tos]) + FOUR[2:]
    six = struct.pack("!I", 6 << 28 | tos << 20) + SIX[4:]
    assert [row.dscp for row in decoded(ethernet(four), ethernet(six, 0x86DD))[0]] == [dscp, dscp], name
