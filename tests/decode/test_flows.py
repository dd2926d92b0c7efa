"""Flow numbers against a dictionary, and the bounds of the table."""

import random

import numpy as np

from rtpaudit.decode import Decoder
from rtpaudit.decode.flows import FlowTable
from tests.craft import ethernet, ipv4, ipv6, tcp, udp
from tests.decode.made import decoded, frames_of, rows_of


def many_frames(count: int) -> list[bytes]:
    """Frames of few and many flows, of both IP versions, mixed with a fixed seed."""
    chance = random.Random(7)
    frames = []
    for _ in range(count):
        host, port = chance.randrange(60), 4000 + 2 * chance.randrange(30)
        if chance.random() < 0.3:
            frames.append(ethernet(ipv6(udp(b"x", port, 4000), f"2001:db8::{host}"), 0x86DD))
        elif chance.random() < 0.1:
            frames.append(ethernet(ipv4(tcp(b"x", port, 5060, 1), f"192.0.2.{host}", protocol=6)))
        else:
            frames.append(ethernet(ipv4(udp(b"x", port, 4000), f"192.0.2.{host}")))
    return frames


def test_flows_are_numbered_by_their_first_packet_over_batches() -> None:
    frames = many_frames(5000)
    decoder = Decoder()
    batches = [
        packets
        for first in range(0, 5000, 700)
        for packets in decoder.decode(frames_of(frames[first : first + 700], first_number=first + 1), "made.pcap")
    ]
    seen: dict[tuple[str, int, str, int, int], int] = {}
    expected = []
    for row in rows_of(batches, decoder.flows):
        key = (row.source, row.source_port, row.destination, row.destination_port, row.protocol)
        expected.append(seen.setdefault(key, len(seen)))
    assert len(seen) > 1024, "the table has to grow"
    assert np.concatenate([packets.flow for packets in batches]).tolist() == expected
    assert len(decoder.flows) == len(seen)


def test_versions_and_protocols_make_different_flows_and_icmp_has_no_ports() -> None:
    _, decoder = decoded(
        ethernet(ipv4(udp(b"x", 5060, 5061))),
        ethernet(ipv4(tcp(b"x", 5060, 5061, 1), protocol=6)),
        ethernet(ipv4(b"\x08\0" + bytes(6), protocol=1)),
        ethernet(ipv6(udp(b"x", 5060, 5061), "c000:20a::", "c000:214::"), 0x86DD),
    )
    flows = decoder.flows
    assert flows.protocol.tolist() == [17, 6, 1, 17]
    assert flows.version.tolist() == [4, 4, 4, 6]
    assert flows.source_port.tolist() == [5060, 5060, 0, 5060]
    assert flows.source.shape == (4, 16)
    assert flows.source_text(3) == "c000:20a::"


def test_beyond_the_most_flows_only_packets_of_known_flows_go_on() -> None:
    decoder = Decoder()
    decoder._path.table = FlowTable(most=2)
    frames = [ethernet(ipv4(udp(b"x", port, 4000))) for port in (1, 2, 3, 1, 4, 2)]
    (packets,) = decoder.decode(frames_of(frames), "made.pcap")
    assert packets.frame.tolist() == [1, 2, 4, 6]
    assert packets.flow.tolist() == [0, 1, 0, 1]
    assert decoder.skipped == {"too many flows": 2}
    (damage,) = decoder.damage
    assert "2 flows" in damage.what


def test_no_flows_before_the_first_packet() -> None:
    flows = Decoder().flows
    assert len(flows) == 0
    assert flows.source.shape == (0, 16)
