"""UDP headers by hand, and what a payload may be by the published tables."""

import csv
import re
import struct
from pathlib import Path

import pytest

from rtpaudit.decode import Kind
from tests.craft import ethernet, ipv4, tcp, udp
from tests.decode.made import Row, decoded
from tests.decode.specimens import SOUND

DEMUX = Path(__file__).parents[1] / "published" / "demux.csv"


def only(rows: list[Row]) -> Row:
    (row,) = rows
    return row


def kind_of(payload: bytes, held: int | None = None) -> Kind:
    frame = ethernet(ipv4(udp(payload)))
    cut = len(frame) if held is None else len(frame) - len(payload) + held
    return Kind(only(decoded(frame[:cut], originals=[len(frame)])[0]).kind)


def udp_with_length(length: int) -> bytes:
    return struct.pack("!HHHH", 4000, 4002, length, 0) + SOUND


@pytest.mark.parametrize("length", [0, 8 + len(SOUND) + 1, 65535])
def test_a_udp_length_that_cannot_be_gives_way_to_that_of_ip(length: int) -> None:
    assert only(decoded(ethernet(ipv4(udp_with_length(length))))[0]).octets == SOUND


def test_a_udp_length_shorter_than_ip_allows_is_believed() -> None:
    assert only(decoded(ethernet(ipv4(udp_with_length(20))))[0]).octets == SOUND[:12]


@pytest.mark.parametrize("length", [1, 7])
def test_a_udp_length_shorter_than_its_header_is_malformed(length: int) -> None:
    assert decoded(ethernet(ipv4(udp_with_length(length))))[1].skipped == {"malformed header": 1}


def test_bad_and_missing_udp_checksums_drop_nothing() -> None:
    rows, _ = decoded(ethernet(ipv4(udp(SOUND, checksum=0))), ethernet(ipv4(udp(SOUND, checksum=0xDEAD))))
    assert [row.octets for row in rows] == [SOUND, SOUND]


def test_an_empty_datagram_is_a_packet() -> None:
    row = only(decoded(ethernet(ipv4(udp(b""))))[0])
    assert (row.octets, row.length, row.kind) == (b"", 0, Kind.OTHER)


def test_tcp_rows_start_at_the_tcp_header() -> None:
    segment = tcp(b"OPTIONS sip:b", 5060, 5061, 77)
    row = only(decoded(ethernet(ipv4(segment, protocol=6)))[0])
    assert (row.kind, row.octets, row.source_port, row.destination_port) == (Kind.TCP, segment, 5060, 5061)


def published(quantity: str) -> list[tuple[str, str, str]]:
    with DEMUX.open() as file:
        rows = [row for row in csv.DictReader(file) if row["quantity"] == quantity]
    return [(row["id"], row["inputs"], row["expected"]) for row in rows]


CLASSES = {"stun": Kind.STUN, "zrtp": Kind.ZRTP, "dtls": Kind.DTLS}
RTP_OR_RTCP = {"rtp": {Kind.RTP}, "rtcp": {Kind.RTCP}, "neither": {Kind.STUN, Kind.DTLS}}


def message(first: int) -> bytes:
    """A payload with this first octet that is well-formed by the rules of the protocol that owns it."""
    if first < 4:
        return struct.pack("!BBHI12s", first, 1, 0, 0x2112A442, bytes(12))
    if 16 <= first < 20:
        return bytes([first, 0, 0, 1]) + b"ZRTP" + bytes(20)
    if 20 <= first < 64:
        return bytes([first, 254, 253]) + bytes(40)
    return bytes([first, 0]) + bytes(70)


@pytest.mark.parametrize(("inputs", "expected"), [row[1:] for row in published("first_byte_class")])
def test_first_octets_tell_the_protocol(inputs: str, expected: str) -> None:
    """RFC 7983, section 7. Ranges that no protocol of ours owns are other."""
    low, high = map(int, re.findall(r"\d+", inputs))
    for first in range(low, high + 1):
        kind = kind_of(message(first))
        if expected == "rtp-or-rtcp":
            assert kind == Kind.RTP
        else:
            assert kind == CLASSES.get(expected, Kind.OTHER), first


@pytest.mark.parametrize(("inputs", "expected"), [row[1:] for row in published("rtp_or_rtcp")])
def test_second_octets_tell_rtp_from_rtcp(inputs: str, expected: str) -> None:
    """RFC 5761, section 4."""
    first, second = (int(octet, 16) for octet in re.findall(r"0x([0-9A-F]{2})", inputs))
    payload = bytes([first, second]) + message(first)[2:]
    assert kind_of(payload) in RTP_OR_RTCP[expected]


def test_every_rtcp_number_is_kept_from_rtp() -> None:
    """RFC 5761, section 4: packet types 192 to 223 are never payload types with or without a marker."""
    kinds = [kind_of(bytes([0x80, second]) + bytes(30)) for second in range(256)]
    assert {second for second, kind in enumerate(kinds) if kind == Kind.RTCP} == set(range(192, 224))
    assert {second for second, kind in enumerate(kinds) if kind == Kind.RTP} == set(range(192)) | set(range(224, 256))


def test_a_csrc_list_that_does_not_fit_is_no_rtp() -> None:
    assert kind_of(bytes([0x8F, 0]) + bytes(10 + 60)) == Kind.RTP
    assert kind_of(bytes([0x8F, 0]) + bytes(10 + 59)) == Kind.OTHER
    assert kind_of(bytes([0x80, 0]) + bytes(9)) == Kind.OTHER


def test_a_snap_length_leaves_rtp_what_it_is() -> None:
    assert kind_of(SOUND, held=4) == Kind.RTP
    assert kind_of(SOUND, held=3) == Kind.OTHER


@pytest.mark.parametrize(
    "text",
    [b"INVITE sip:b@192.0.2.20 SIP/2.0\r\n", b"\r\nSIP/2.0 200 OK\r\n", b"200 1201 OK\r\n", b"RQNT 1201", b"!/1 ["],
)
def test_texts_are_told_by_their_letters(text: bytes) -> None:
    assert kind_of(text) == Kind.TEXT


@pytest.mark.parametrize(
    "payload",
    [
        b"abc",
        b"INVITE\xff ",
        struct.pack("!HHHHHH", 0x0001, 0x0100, 1, 0, 0, 0) + b"\x07example\0\0\x01\0\x01",
        bytes([0xC3, 0, 0, 0, 1, 8]) + bytes(1200),
        bytes([0x16, 3, 3]) + bytes(40),
        bytes([0x00, 0x01, 0, 3]) + bytes(40),
        bytes([0x00, 0x01, 0, 8]) + bytes(40),
    ],
    ids=["three letters", "a letter beyond ASCII", "DNS", "QUIC", "TLS", "a STUN length off by one", "an old STUN cut"],
)
def test_what_only_looks_like_it_is_other(payload: bytes) -> None:
    assert kind_of(payload) == Kind.OTHER


def test_the_older_stun_is_told_by_its_exact_length() -> None:
    assert kind_of(bytes([0, 1, 0, 8]) + bytes(16 + 8)) == Kind.STUN
