"""Extended report blocks: the traces that RFC 3611 writes out, and every block cut anywhere."""

import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.rtcp_xr import (
    Block,
    ExtendedReport,
    LastReceiverReport,
    LastReceiverReports,
    OtherBlock,
    ReceiptTimes,
    ReceiverReferenceTime,
    Refused,
    RunLengths,
    StatisticsSummary,
)
from tests.signalling.rtcp_octets import extended_report, run_lengths, xr_block

# RFC 3611 section 4.1: 45 packets from 13821 on, and the three ways in which the RFC writes them.
TRACE = "111111111111111111111 0101 11111111111111111111".replace(" ", "")
TRACE_44TH_LOST = TRACE[:43] + "01"
VECTOR = 0x8000


def vector(bits: str) -> int:
    return VECTOR | int(bits.replace(" ", ""), 2)


def run(event: int, length: int) -> int:
    return event << 14 | length


def blocks(*octets: bytes) -> tuple[Block, ...]:
    return ExtendedReport.parse(0, extended_report(1, octets)[4:]).blocks


def trace(block: Block) -> str:
    assert isinstance(block, RunLengths)
    return "".join(str(int(event)) for event in block.events)


def test_the_rfc_s_trace_as_bit_vectors() -> None:
    chunks = [vector("1111 1111 1111 111"), vector("1111 1101 0111 111"), vector("1111 1111 1111 111"), 0]
    assert trace(blocks(run_lengths(1, 2, 13_821, 13_866, chunks))[0]) == TRACE


def test_the_rfc_s_trace_as_runs() -> None:
    chunks = [run(1, 21), vector("0101 1111 1111 111"), run(1, 9), 0]
    assert trace(blocks(run_lengths(1, 2, 13_821, 13_866, chunks))[0]) == TRACE


def test_bits_behind_the_last_number_are_ignored() -> None:
    chunks = [run(1, 21), vector("0101 1111 1111 111"), vector("1111 1110 1000 000"), 0]
    assert trace(blocks(run_lengths(1, 2, 13_821, 13_866, chunks))[0]) == TRACE_44TH_LOST


def test_the_rfc_s_thinned_trace() -> None:
    block = blocks(run_lengths(1, 2, 13_821, 13_866, [vector("1111 1011 1100 000"), 0], thinning=2))[0]
    assert isinstance(block, RunLengths)
    assert trace(block) == "11111011110"
    assert block.sequence == [
        13_824, 13_828, 13_832, 13_836, 13_840, 13_844, 13_848, 13_852, 13_856, 13_860, 13_864,
    ]  # fmt: skip


def test_a_trace_goes_on_over_the_wrap() -> None:
    block = blocks(run_lengths(1, 2, 65_534, 2, [run(0, 2), run(1, 2)]))[0]
    assert isinstance(block, RunLengths)
    assert list(zip(block.sequence, block.events, strict=True)) == [
        (65_534, False),
        (65_535, False),
        (0, True),
        (1, True),
    ]


def test_duplicates_are_told_in_the_same_way() -> None:
    block = blocks(run_lengths(2, 2, 10, 13, [vector("101 0000 0000 0000"), 0]))[0]
    assert block == RunLengths(2, True, 0, 10, 13, (True, False, True))


def test_a_trace_shorter_than_its_range_is_refused() -> None:
    block = blocks(run_lengths(1, 2, 0, 100, [run(1, 20), run(0, 30)]))[0]
    assert block == Refused(1, "RTCP XR loss RLE block tells of 50 packets, its range needs 100")


def test_runs_longer_than_all_numbers_cost_no_memory() -> None:
    block = blocks(run_lengths(1, 2, 1, 0, [run(1, 16_383)] * 30_000))[0]
    assert len(trace(block)) == 65_535


@given(
    events=st.lists(st.booleans(), min_size=1, max_size=400),
    begin=st.integers(0, 65_535),
    thinning=st.integers(0, 3),
    as_runs=st.booleans(),
)
def test_any_trace_comes_back(events: list[bool], begin: int, thinning: int, as_runs: bool) -> None:
    first = -(-begin >> thinning) << thinning
    end = (first + ((len(events) - 1) << thinning) + 1) & 0xFFFF
    if as_runs:
        chunks = [run(event, 1) for event in events]
    else:
        padded = [*events, *[False] * (-len(events) % 15)]
        rows = [padded[at : at + 15] for at in range(0, len(padded), 15)]
        chunks = [vector("".join(str(int(event)) for event in row)) for row in rows]
    block = blocks(run_lengths(1, 2, begin, end, chunks + [0] * (len(chunks) % 2), thinning))[0]
    assert isinstance(block, RunLengths)
    assert list(block.events) == events
    assert block.sequence[0] == first & 0xFFFF


def test_receipt_times() -> None:
    content = struct.pack("!IHH3I", 2, 65_535, 2, 160, 320, 480)
    assert blocks(xr_block(3, content)) == (ReceiptTimes(2, 0, 65_535, 2, (160, 320, 480)),)
    assert blocks(xr_block(3, content[:-4])) == (
        Refused(3, "RTCP XR receipt times block tells of 2 packets, its range needs 3"),
    )


def test_reference_time_and_its_echo() -> None:
    reference, echo = blocks(
        xr_block(4, bytes.fromhex("b44db70520000000")), xr_block(5, struct.pack("!6I", 2, 0xB7052000, 7, 3, 0, 0))
    )
    assert reference == ReceiverReferenceTime(0xB44DB705_20000000)
    assert isinstance(reference, ReceiverReferenceTime)
    assert isinstance(echo, LastReceiverReports)
    assert echo.receivers == (LastReceiverReport(2, reference.ntp_middle, 7), LastReceiverReport(3, 0, 0))


STATISTICS = struct.pack("!IHH6I4B", 2, 10, 20, 1, 2, 3, 4, 5, 6, 60, 64, 62, 1)


def test_statistics_that_flags_leave_out_are_missing() -> None:
    whole = StatisticsSummary(2, 10, 20, 1, 2, (3, 4, 5, 6), (60, 64, 62, 1), hop_limit=False)
    assert blocks(xr_block(6, STATISTICS, 0xE8)) == (whole,)
    assert blocks(xr_block(6, STATISTICS, 0xF0))[0] != whole
    none = STATISTICS[:8] + bytes(28)
    assert blocks(xr_block(6, none, 0)) == (StatisticsSummary(2, 10, 20, None, None, None, None, hop_limit=False),)


@pytest.mark.parametrize(
    ("flags", "fault"),
    [
        (0x68, "gives losses that its flags leave out"),
        (0xA8, "gives duplicates that its flags leave out"),
        (0xC8, "gives jitter that its flags leave out"),
        (0xE0, "gives times to live that its flags leave out"),
        (0xF8, "has 3 for its kind of time to live, which means nothing"),
    ],
)
def test_statistics_that_contradict_their_flags_are_refused(flags: int, fault: str) -> None:
    """RFC 3611 section 4.6: the receiver must ignore such a block."""
    assert blocks(xr_block(6, STATISTICS, flags)) == (Refused(6, f"RTCP XR statistics block {fault}"),)


SOUND = {
    1: run_lengths(1, 2, 0, 40, [run(1, 21), vector("0101 1111 1111 111"), run(1, 9), 0]),
    2: run_lengths(2, 2, 0, 15, [vector("1111 1111 1111 111"), 0]),
    3: xr_block(3, struct.pack("!IHH3I", 2, 0, 3, 160, 320, 480)),
    4: xr_block(4, bytes(8)),
    5: xr_block(5, bytes(24)),
    6: xr_block(6, STATISTICS, 0xE8),
    7: xr_block(7, bytes(32)),
}


@pytest.mark.parametrize("kind", SOUND)
def test_a_cut_block_costs_itself_alone(kind: int) -> None:
    whole = SOUND[kind]
    for words in range(len(whole) // 4 - 1):
        cut = whole[:2] + words.to_bytes(2, "big") + whole[4 : 4 + 4 * words]
        block, other = blocks(cut, xr_block(99, b"abcd"))
        assert other == OtherBlock(99, b"abcd")
        if kind == 5 and words % 3 == 0:
            assert isinstance(block, LastReceiverReports)
        else:
            assert isinstance(block, Refused)
            assert block.kind == kind
            assert block.fault.startswith("RTCP XR ")


def test_every_cut_of_a_report_is_refused_by_name() -> None:
    body = extended_report(1, list(SOUND.values()))[4:]
    starts = [4]
    for octets in SOUND.values():
        starts.append(starts[-1] + len(octets))
    for cut in range(len(body)):
        if cut in starts:
            assert len(ExtendedReport.parse(0, body[:cut]).blocks) == starts.index(cut)
            continue
        with pytest.raises(MalformedPacket, match=r"^RTCP (extended report|XR block)"):
            ExtendedReport.parse(0, body[:cut])


@given(octets=st.binary(max_size=400))
def test_noise_is_read_or_refused(octets: bytes) -> None:
    try:
        report = ExtendedReport.parse(0, octets)
    except MalformedPacket:
        return
    assert len(report.blocks) <= len(octets) // 4
