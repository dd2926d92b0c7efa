"""ICMP errors and their quotations, by hand."""

import pytest

from rtpaudit.decode import Decoder
from rtpaudit.decode.icmp import IcmpError, quoted
from tests.craft import A6, B6, START_NS, A, B, ethernet, ipv4, ipv6, rtp, tcp, udp
from tests.decode.made import frames_of

DATAGRAM = udp(rtp(), 4000, 4002)


def errors(*frames: bytes) -> list[IcmpError]:
    packets = Decoder().decode(frames_of(frames), "made.pcap")
    return [error for batch in packets for error in quoted(batch)]


def unreachable(packet: bytes, code: int = 3, kind: int = 3) -> bytes:
    return ethernet(ipv4(bytes([kind, code]) + bytes(6) + packet, B, A, protocol=1))


def test_port_unreachable_names_the_datagram_that_nobody_wanted() -> None:
    assert errors(unreachable(ipv4(DATAGRAM)[:28])) == [
        IcmpError(1, START_NS, 0, 3, 3, True, 17, A, 4000, B, 4002),
    ]


def test_port_unreachable_in_ipv6() -> None:
    frame = ethernet(ipv6(b"\x01\x04" + bytes(6) + ipv6(DATAGRAM), B6, A6, next_header=58), 0x86DD)
    assert errors(frame) == [IcmpError(1, START_NS, 0, 1, 4, True, 17, A6, 4000, B6, 4002)]


def test_time_exceeded_of_a_tcp_segment_is_an_error_but_no_port_unreachable() -> None:
    segment = ipv4(tcp(b"", 5060, 5061, 1), options=b"\x94\x04\0\0", protocol=6)
    (error,) = errors(unreachable(segment, code=0, kind=11))
    assert (error.protocol, error.source_port, error.destination_port) == (6, 5060, 5061)
    assert not error.port_unreachable


@pytest.mark.parametrize(
    "frame",
    [
        unreachable(ipv4(DATAGRAM)[:23]),
        unreachable(ipv4(DATAGRAM), kind=8),
        unreachable(ipv4(DATAGRAM, fragment_offset=1480)),
        unreachable(ipv4(b"\0" * 40, protocol=50)),
        unreachable(b"\xf0" * 40),
        unreachable(b"\x40" + bytes(40)),
        unreachable(b""),
    ],
    ids=["a quotation cut short", "an echo", "a later fragment", "ESP", "no IP", "a header of no length", "nothing"],
)
def test_what_quotes_no_ports_is_passed_over(frame: bytes) -> None:
    assert errors(frame) == []


def test_a_quoted_packet_is_never_a_packet_of_its_own() -> None:
    (packets,) = Decoder().decode(frames_of([unreachable(ipv4(DATAGRAM))]), "made.pcap")
    assert packets.kind.tolist() == [8]


def test_a_flood_is_read_up_to_its_bound() -> None:
    (packets,) = Decoder().decode(frames_of([unreachable(ipv4(DATAGRAM))] * 9), "made.pcap")
    assert len(list(quoted(packets, most=5))) == 5


def test_every_prefix_of_an_error_is_read_or_passed_over() -> None:
    whole = unreachable(ipv4(DATAGRAM))
    frames = [whole[:length] for length in range(len(whole) + 1)]
    batch = frames_of(frames, originals=[len(whole)] * len(frames))
    for packets in Decoder().decode(batch, "made.pcap"):
        # the ports end 14 + 20 + 8 + 20 + 4 octets into the frame
        assert [error.frame - 1 for error in quoted(packets)] == list(range(66, len(whole) + 1))
