"""RTCP packets of RFC 3550, whole, cut, padded and secured, and those that real agents sent."""

import json
import random
from pathlib import Path
from typing import Any

import dpkt
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling import rtcp
from rtpaudit.signalling.rtcp import (
    Application,
    Goodbye,
    OtherPacket,
    ReceiverReport,
    ReportBlock,
    SenderReport,
    SourceDescription,
    parse_compound,
)
from rtpaudit.signalling.rtcp_xr import (
    ExtendedReport,
    ReceiverReferenceTime,
    Refused,
    StatisticsSummary,
    VoipMetrics,
)
from rtpaudit.signalling.srtcp import encryption
from tests.published import published_rows
from tests.signalling.rtcp_octets import (
    extended_report,
    goodbye,
    packet,
    receiver_report,
    report_block,
    secured,
    sender_report,
    source_description,
    xr_block,
)

PUBLISHED = {row["id"]: row for row in published_rows("rtcp")}
CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"

REPORT = sender_report(1, 0xB44DB705_20000000, 160, 10, 1600, [report_block(2, 3, -1, 65_540, 8, 9, 10)])
NAMES = source_description([(1, [(1, b"leitstand@192.0.2.10"), (2, b"Fabian")])])
FAREWELL = goodbye([1, 2], b"shift ends")
REFERENCE = extended_report(1, [xr_block(4, bytes(8))])
COMPOUND = REPORT + NAMES + REFERENCE + packet(204, 5, b"\0\0\0\1TESTabcd") + FAREWELL


def test_a_compound_packet_gives_its_packets_in_order() -> None:
    assert parse_compound(COMPOUND) == [
        SenderReport(1, 0xB44DB705_20000000, 160, 10, 1600, (ReportBlock(2, 3, -1, 65_540, 8, 9, 10),)),
        SourceDescription((rtcp.SourceNames(1, ((1, "leitstand@192.0.2.10"), (2, "Fabian"))),)),
        ExtendedReport(1, (ReceiverReferenceTime(0),)),
        Application(1, 5, "TEST", b"abcd"),
        Goodbye((1, 2), "shift ends"),
    ]


def test_the_middle_of_the_ntp_time_stamp() -> None:
    """RFC 3550, figure 2."""
    report = parse_compound(REPORT)[0]
    assert isinstance(report, SenderReport)
    assert report.ntp_middle == int(PUBLISHED["LSR"]["expected"], 16)


def test_a_cumulative_loss_of_24_bits_may_be_negative() -> None:
    wire, value = PUBLISHED["CUM-NEG"]["expected"].split()
    for lost, octets in ((int(value.strip("()")), int(wire, 16)), (0x7FFFFF, 0x7FFFFF), (-0x800000, 0x800000)):
        block = ReportBlock.parse(report_block(2, 255, octets))
        assert (block.fraction_lost, block.cumulative_lost) == (255, lost)


def test_a_reduced_size_packet_reads_alone() -> None:
    """RFC 5506: the first packet may be of any type."""
    assert parse_compound(FAREWELL) == [Goodbye((1, 2), "shift ends")]
    assert parse_compound(packet(205, 15, bytes(12))) == [OtherPacket(205, 15, bytes(12))]
    assert parse_compound(receiver_report(7)) == [ReceiverReport(7, ())]


def test_names_end_with_a_null_octet_or_with_the_packet() -> None:
    two = source_description([(1, [(1, b"a")]), (2, [(1, b"bcd"), (8, b"\x03abcd")])])
    chunks = (rtcp.SourceNames(1, ((1, "a"),)), rtcp.SourceNames(2, ((1, "bcd"), (8, "\\x03abcd"))))
    assert parse_compound(two) == [SourceDescription(chunks)]
    unended = packet(202, 1, b"\0\0\0\1\1\2ab")
    assert parse_compound(unended) == [SourceDescription((rtcp.SourceNames(1, ((1, "ab"),)),))]
    assert parse_compound(source_description([(1, [])])) == [SourceDescription((rtcp.SourceNames(1, ()),))]
    assert [chunk.cname for chunk in chunks] == ["a", "bcd"]
    assert rtcp.SourceNames(1, ()).cname == ""


def test_padding_is_no_part_of_a_packet() -> None:
    assert parse_compound(REPORT + packet(203, 1, b"\0\0\0\1", padding=8)) == [
        *parse_compound(REPORT),
        Goodbye((1,), ""),
    ]
    assert isinstance(parse_compound(packet(203, 1, b"\0\0\0\1", padding=4)[:-1] + b"\xff")[0], Refused)


def test_every_cut_between_packets_is_a_packet_and_every_other_is_refused_by_name() -> None:
    ends = {len(REPORT): 1, len(REPORT + NAMES): 2, len(REPORT + NAMES + REFERENCE): 3}
    ends[len(COMPOUND) - len(FAREWELL)] = 4
    names = ["sender report", "source description", "extended report", "application packet", "goodbye"]
    for cut in range(len(COMPOUND)):
        if cut in ends:
            assert len(parse_compound(COMPOUND[:cut])) == ends[cut]
            continue
        with pytest.raises(MalformedPacket) as raised:
            parse_compound(COMPOUND[:cut])
        before = max((end for end in ends if end < cut), default=0)
        left = cut - before
        expected = f"RTCP {names[ends.get(before, 0)]} has {left} octets, its length field promises"
        if left < 4:
            expected = f"RTCP header has {left} octets, needs 4" if cut else "RTCP datagram is empty"
        assert str(raised.value).startswith(expected)
        assert len(parse_compound(COMPOUND[:cut], cut=True) if cut else []) == ends.get(before, 0)


@pytest.mark.parametrize(
    ("octets", "fault"),
    [
        (packet(200, 0, bytes(20)), "RTCP sender report has 20 octets up to its sender's counts, needs 24"),
        (packet(200, 2, bytes(48)), "RTCP sender report holds 1 report blocks, its header promises 2"),
        (packet(201, 0, b""), "RTCP receiver report has 0 octets up to its SSRC, needs 4"),
        (packet(201, 1, bytes(24)), "RTCP receiver report holds 0 report blocks, its header promises 1"),
        (packet(202, 2, bytes(8)), "RTCP source description holds 1 chunks, its header promises 2"),
        (packet(202, 1, b"\0\0\0\1\1\7ab"), "RTCP source description item of type 1 has 2 octets, needs 7"),
        (packet(203, 3, bytes(8)), "RTCP goodbye holds 2 sources, its header promises 3"),
        (packet(203, 1, b"\0\0\0\1\x09abc"), "RTCP goodbye has 3 octets of its reason, needs 9"),
        (packet(204, 0, bytes(4)), "RTCP application packet has 4 octets up to its name, needs 8"),
        (packet(207, 0, b""), "RTCP extended report has 0 octets up to its SSRC, needs 4"),
    ],
)
def test_a_packet_that_does_not_hold_what_it_promises_costs_itself_alone(octets: bytes, fault: str) -> None:
    first, refused, last = parse_compound(REPORT + octets + FAREWELL)
    assert refused == Refused(octets[1], fault)
    assert (first, last) == (parse_compound(REPORT)[0], Goodbye((1, 2), "shift ends"))


@pytest.mark.parametrize(
    ("octets", "fault"),
    [
        (b"", "RTCP datagram is empty"),
        (b"\x40\xc8\0\1" + bytes(4), "RTCP header has version 1, needs 2"),
        (b"\x80\x60\0\1" + bytes(4), "RTCP header has packet type 96, needs one from 192 to 223"),
        (REPORT + b"\0\0\0\0", "RTCP header has version 0, needs 2"),
    ],
)
def test_what_is_no_rtcp_is_refused(octets: bytes, fault: str) -> None:
    with pytest.raises(MalformedPacket, match=fault):
        parse_compound(octets)


@pytest.mark.parametrize(
    "tag", [int(PUBLISHED[f"SRTP-{name}_bits"]["expected"]) // 8 for name in ("default_auth_tag", "short_tag")]
)
def test_secured_packets_are_told_from_plain_ones(tag: int) -> None:
    for plain in (COMPOUND, REPORT, receiver_report(7, [report_block(2)])):
        assert encryption(plain) == ""
        assert encryption(secured(plain, 5, tag)) == "encrypted"
        with pytest.raises(MalformedPacket, match="encrypted"):
            parse_compound(secured(plain, 5, tag))


@pytest.mark.parametrize("tag", [10, 4])
def test_packets_that_are_authenticated_but_not_encrypted_are_read(tag: int) -> None:
    open_one = secured(COMPOUND, 5, tag, encrypted=False)
    assert encryption(open_one) == "authenticated"
    assert parse_compound(open_one) == parse_compound(COMPOUND)


def read_or_refused(octets: bytes, cut: bool = False) -> list[rtcp.Packet]:
    try:
        return parse_compound(octets, cut)
    except MalformedPacket:
        return []


@given(octets=st.binary(max_size=300))
def test_noise_is_read_or_refused(octets: bytes) -> None:
    for cut in (False, True):
        assert len(read_or_refused(octets, cut)) <= len(octets) // 4


def test_random_damage_is_read_or_refused() -> None:
    chance = random.Random(1)
    for _ in range(3000):
        octets = bytearray(COMPOUND)
        for _ in range(chance.randint(1, 6)):
            octets[chance.randrange(len(octets))] = chance.randrange(256)
        assert len(read_or_refused(bytes(octets))) <= len(COMPOUND) // 4


# Real agents. The truth files number frames from 1 and list one entry for each packet of a datagram.


def frames(name: str) -> list[bytes]:
    with (CAPTURES / f"{name}.pcap").open("rb") as file:
        return [octets for _, octets in dpkt.pcap.Reader(file)]


def truth(name: str) -> dict[str, Any]:
    found: dict[str, Any] = json.loads((CAPTURES / f"{name}.truth.json").read_text())
    return found


def shown(ssrc: int) -> str:
    return f"0x{ssrc:08x}"


def as_told(packet: rtcp.Packet) -> dict[str, Any]:
    """A packet in the words of the truth files."""
    if isinstance(packet, SourceDescription):
        return {"type": "SDES"}
    assert isinstance(packet, SenderReport | ReceiverReport | ExtendedReport)
    if isinstance(packet, ExtendedReport):
        return {"type": "XR", "ssrc": shown(packet.ssrc), "xr": [block_as_told(block) for block in packet.blocks]}
    blocks = [
        {
            "about": shown(block.ssrc),
            "fraction_lost_256": block.fraction_lost,
            "cumulative_lost": block.cumulative_lost,
            "ext_highest_seq": block.highest_sequence,
            "jitter_ts": block.jitter,
            "lsr": block.last_sr,
            "dlsr_65536": block.delay_since_last_sr,
        }
        for block in packet.blocks
    ]
    if isinstance(packet, ReceiverReport):
        return {"type": "RR", "ssrc": shown(packet.ssrc), "blocks": blocks}
    return {
        "type": "SR",
        "ssrc": shown(packet.ssrc),
        "ntp_mid32": packet.ntp_middle,
        "rtp_ts": packet.rtp_timestamp,
        "sent_packets": packet.packets,
        "sent_octets": packet.octets,
        "blocks": blocks,
    }


def block_as_told(block: object) -> dict[str, Any]:
    if isinstance(block, ReceiverReferenceTime):
        return {"block": "receiver reference time", "ntp_mid32": block.ntp_middle}
    if isinstance(block, StatisticsSummary):
        assert block.jitter
        assert block.ttl
        jitter = dict(
            zip(("min_jitter_ts", "max_jitter_ts", "mean_jitter_ts", "dev_jitter_ts"), block.jitter, strict=True)
        )
        ttl = dict(zip(("min_ttl", "max_ttl", "mean_ttl", "dev_ttl"), block.ttl, strict=True))
        counts = {"lost": block.lost, "duplicates": block.duplicated}
        span = {"about": shown(block.ssrc), "begin_seq": block.begin, "end_seq": block.end}
        return {"block": "statistics summary", **span, **counts, **jitter, **ttl}
    assert isinstance(block, VoipMetrics)
    return {
        "block": "VoIP metrics",
        "about": shown(block.ssrc),
        "loss_rate_256": block.loss_rate,
        "discard_rate_256": block.discard_rate,
        "burst_density_256": block.burst_density,
        "gap_density_256": block.gap_density,
        "burst_duration_ms": block.burst_duration_ms,
        "gap_duration_ms": block.gap_duration_ms,
        "round_trip_delay_ms": block.round_trip_delay,
        "end_system_delay_ms": block.end_system_delay,
        "signal_level_dbm": block.signal_level,
        "noise_level_dbm": block.noise_level,
        "rerl_db": block.echo_return_loss,
        "gmin": block.gmin,
        "r_factor": block.r,
        "ext_r_factor": block.external_r,
        "mos_lq_x10": block.mos_lq_tenths,
        "mos_cq_x10": block.mos_cq_tenths,
        "rx_config": block.configuration,
        "jb_nominal_ms": block.playout_nominal_ms,
        "jb_maximum_ms": block.playout_maximum_ms,
        "jb_abs_max_ms": block.playout_most_ms,
    }


NOT_OF_THE_PACKET = {"t", "src", "dst", "frame", "xr_block_types", "flags", "reserved", "means"}


def bare(told: Any) -> Any:
    if isinstance(told, list):
        return [bare(one) for one in told]
    if isinstance(told, dict):
        return {name: bare(value) for name, value in told.items() if name not in NOT_OF_THE_PACKET}
    return told


@pytest.mark.parametrize("name", ["rtp-pcma-20-rtcp.b", "xr-loss3.a", "clean-pcmu-udp.a", "combo-two-segments.b"])
def test_every_packet_of_a_real_call_reads_as_the_truth_has_it(name: str) -> None:
    captured = frames(name)
    told = [row for row in truth(name)["rtcp"] if row["type"] in ("SR", "RR", "SDES", "XR")]
    assert len(told) > 10
    for number in sorted({row["frame"] for row in told}):
        packets = [as_told(one) for one in parse_compound(captured[number - 1][42:]) if not isinstance(one, Goodbye)]
        assert packets == [bare(row) for row in told if row["frame"] == number]


def test_the_reports_of_a_real_encrypted_call_are_told_to_be_so() -> None:
    seen = []
    for octets in frames("srtp-sdes.b"):
        ip = dpkt.ethernet.Ethernet(octets).data
        payload = bytes(ip.data.data) if isinstance(ip, dpkt.ip.IP) and isinstance(ip.data, dpkt.udp.UDP) else b""
        if len(payload) >= 8 and payload[0] >> 6 == 2 and 192 <= payload[1] <= 223:
            seen.append((payload[1], encryption(payload)))
    # One agent opens a port with a plain application packet and leaves with a plain goodbye.
    assert {kind for kind, secured in seen if not secured} == {204, 203}
    assert {kind for kind, secured in seen if secured == "encrypted"} >= {200, 201}
    assert {secured for _, secured in seen} == {"", "encrypted"}
