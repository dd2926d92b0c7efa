"""Tunnels, by hand: what is inside counts, and what only looks like a tunnel stays what it is."""

import struct

import pytest

from rtpaudit.decode import Kind
from tests.craft import A, ethernet, ipv4, rtp, udp
from tests.decode.made import Row, decoded
from tests.decode.specimens import FOUR, INNER, SIX, SOUND, SPECIMENS, gre, gtp_u, label, outer

TUNNELLED = [
    name
    for name in SPECIMENS
    if name.startswith(("GRE", "VXLAN", "Geneve", "GTP-U", "a mirror", "IP in IP", "IPv6 in", "IPv4 in"))
]


def only(rows: list[Row]) -> Row:
    (row,) = rows
    return row


@pytest.mark.parametrize("name", TUNNELLED)
def test_addresses_marking_and_payload_are_those_of_the_inner_packet(name: str) -> None:
    row = only(decoded(SPECIMENS[name][1])[0])
    assert (row.source_port, row.destination_port, row.octets, row.kind) == (4000, 4002, SOUND, Kind.RTP)
    assert (row.dscp, row.ttl) == (46, 61)
    assert row.source in (A, "2001:db8::10")


def test_a_mirror_session_of_type_iii_is_entered() -> None:
    header = bytes(11) + b"\0"
    with_platform = bytes(11) + b"\x01" + bytes(8)
    for mirror in (header, with_platform):
        frame = ethernet(gre(0x1000, 0x22EB, bytes(4) + mirror, INNER))
        assert only(decoded(frame)[0]).octets == SOUND


def test_point_to_point_tunnels_are_entered() -> None:
    """GRE version 1 with key, sequence and acknowledgement around PPP."""
    frame = ethernet(gre(0x3081, 0x880B, bytes(12), b"\xff\x03\0\x21" + FOUR))
    assert only(decoded(frame)[0]).octets == SOUND


def test_mpls_within_ip_and_within_gre_is_entered() -> None:
    stack = label(16, False) + label(17, True)
    for packet in (ipv4(stack + SIX, protocol=137), gre(0, 0x8847, b"", stack + SIX)):
        assert only(decoded(ethernet(packet))[0]).octets == SOUND


def test_the_vlan_inside_a_tunnel_is_the_innermost() -> None:
    tagged = ethernet(FOUR, vlans=[300])
    frame = outer(b"\x08\0\0\0\0\0\x07\0" + tagged, 4789)
    assert only(decoded(frame)[0]).vlan == 300


LOOKS_LIKE = {
    "sound on the port of VXLAN": (4789, SOUND),
    "sound on the port of GTP-U": (2152, rtp(payload=b"\xff" * 160)),
    "VXLAN with other flags": (4789, b"\x48\0\0\0\0\0\x07\0" + INNER),
    "VXLAN with a reserved octet": (4789, b"\x08\0\0\0\0\0\x07\x01" + INNER),
    "a Geneve version to come": (6081, b"\x41\0\x65\x58\0\0\x07\0" + INNER),
    "a GTP-U echo": (2152, struct.pack("!BBHI", 0x32, 1, 4, 0) + bytes(20)),
    "a VXLAN header on another port": (4790, b"\x08\0\0\0\0\0\x07\0" + INNER),
}


@pytest.mark.parametrize("name", LOOKS_LIKE)
def test_a_payload_without_the_tunnels_header_stays_a_packet(name: str) -> None:
    port, payload = LOOKS_LIKE[name]
    row = only(decoded(outer(payload, port))[0])
    assert (row.destination_port, row.octets) == (port, payload)


INSIDE = {
    "ARP": (gre(0, 0x0806, b"", bytes(28)), "not IP"),
    "what nobody knows": (gre(0, 0x4321, b"", bytes(28)), "not IP"),
    "source routes": (gre(0x4000, 0x0800, bytes(8), FOUR), "not IP"),
    "a header longer than the packet": (gre(0xB000, 0x0800, b"", bytes(4)), "malformed header"),
    "nothing": (gre(0, 0x0800, b"", b""), "malformed header"),
}


@pytest.mark.parametrize("name", INSIDE)
def test_tunnels_that_lead_nowhere_are_counted(name: str) -> None:
    packet, reason = INSIDE[name]
    rows, decoder = decoded(ethernet(packet))
    assert rows == []
    assert decoder.skipped == {reason: 1}
    assert decoder._path.slow.classes == {}, "the slow path would find the outer packet"


def test_tunnels_in_tunnels_end_somewhere() -> None:
    packet = FOUR
    for _ in range(40):
        packet = gre(0, 0x0800, b"", packet)
    assert decoded(ethernet(packet))[1].skipped == {"too many headers inside each other": 1}


def test_extension_headers_of_gtp_u_without_end_are_left() -> None:
    chain = b"\0\0\0\x85" + b"\x01\0\0\x85" * 60
    rows, decoder = decoded(outer(gtp_u(4, chain, FOUR), 2152))
    assert rows == []
    assert decoder.skipped == {"malformed header": 1}


def test_an_empty_extension_header_of_gtp_u_ends_the_search() -> None:
    rows, decoder = decoded(outer(gtp_u(4, b"\0\0\0\x85" + bytes(4), FOUR), 2152))
    assert rows == []
    assert decoder.skipped == {"malformed header": 1}


def test_some_tunnelled_rows_among_many_plain_ones_keep_the_order() -> None:
    frames = [ethernet(ipv4(udp(rtp(sequence=number)))) for number in range(6)]
    frames[2] = SPECIMENS["GRE"][1]
    frames[4] = SPECIMENS["VXLAN"][1]
    assert [row.frame for row in decoded(*frames)[0]] == [1, 2, 3, 4, 5, 6]
