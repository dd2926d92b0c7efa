"""Round trips and loss by the reports of far receivers, and reports that are not to be believed."""

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.metrics.reports import (
    between_reports,
    doubts,
    fraction_lost,
    half_trip_ms,
    referred_reports,
    round_trip_s,
    whole_trip_ms,
)
from tests.published import published_rows

ROWS = published_rows("rtcp")
CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"
MS = 1_000_000


def inputs(row: dict[str, str]) -> dict[str, int]:
    return {name: int(value, 0) for name, value in (pair.split("=") for pair in row["inputs"].split("; "))}


@pytest.mark.parametrize("row", [row for row in ROWS if row["quantity"] == "round_trip_s"], ids=lambda row: row["id"])
def test_the_round_trip_of_figure_2(row: dict[str, str]) -> None:
    """RFC 3550, figure 2."""
    given_ = inputs(row)
    assert round_trip_s([given_["A"]], [given_["LSR"]], [given_["DLSR"]]).tolist() == [float(row["expected"])]


def test_a_round_trip_goes_on_over_the_wrap_and_may_come_out_negative() -> None:
    trips = round_trip_s([0x00010000, 5, 7], [0xFFFF0000, 5, 0], [0x00008000, 0x00010000, 0])
    assert trips[:2].tolist() == [1.5, -1.0]
    assert math.isnan(trips[2])


@pytest.mark.parametrize(
    "row", [row for row in ROWS if row["quantity"] == "fraction_lost_q8"], ids=lambda row: row["id"]
)
def test_the_fraction_lost(row: dict[str, str]) -> None:
    """RFC 3550, A.3."""
    given_ = inputs(row)
    found = fraction_lost([given_["expected_interval"]], [given_["received_interval"]])
    assert found.tolist() == [int(row["expected"])]


def test_a_fraction_stays_within_its_octet() -> None:
    assert fraction_lost([10, 0], [0, 0]).tolist() == [255, 0]


def test_loss_between_reports() -> None:
    found = between_reports([0x1FFF0, 0x2000A, 0x20014, 0x20014], [5, 6, 4, 4])
    assert found.expected[1:].tolist() == [26.0, 10.0, 0.0]
    assert found.lost[1:].tolist() == [1.0, -2.0, 0.0]
    assert found.loss_pct[1:3].tolist() == [100 / 26, 0.0]
    assert math.isnan(found.loss_pct[3])
    assert all(math.isnan(one[0]) for one in (found.expected, found.lost, found.loss_pct))
    assert len(between_reports([], []).lost) == 0


def test_the_number_of_packets_wraps_at_32_bits() -> None:
    assert between_reports([0xFFFFFFFE, 3], [0, 0]).expected[1] == 5.0


def referred(last: list[int], times: list[int], sent: list[int], sent_times: list[int]) -> list[int]:
    """Plain loop: the last sender report with this time stamp that came no later."""
    found = []
    for wanted, time in zip(last, times, strict=True):
        fitting = [row for row in range(len(sent)) if sent[row] == wanted and sent_times[row] <= time and wanted]
        latest = max((sent_times[row] for row in fitting), default=0)
        found.append(max((row for row in fitting if sent_times[row] == latest), default=-1))
    return found


SMALL = st.integers(0, 6)


@given(
    blocks=st.lists(st.tuples(SMALL, SMALL), max_size=20),
    reports=st.lists(st.tuples(SMALL, SMALL), max_size=20),
    add=st.sampled_from([0, 0xFFFFFFF0]),
)
def test_blocks_refer_to_the_reports_that_a_plain_loop_finds(
    blocks: list[tuple[int, int]], reports: list[tuple[int, int]], add: int
) -> None:
    last, times = [add + one for one, _ in blocks], [time for _, time in blocks]
    sent, sent_times = [add + one for one, _ in reports], [time for _, time in reports]
    assert referred_reports(last, times, sent, sent_times).tolist() == referred(last, times, sent, sent_times)


def test_half_a_trip_is_what_lies_behind_the_capture_point() -> None:
    # Sent at 0 and 5 s; answered after 2 s with a delay of 1.5 s, and after 1 ms with 10 ms.
    sent = [0, 5_000 * MS]
    trips = half_trip_ms(sent, [2_000 * MS, 5_001 * MS, 9_000 * MS], [98_304, 655, 0], [0, 1, -1])
    assert trips[:2].tolist() == pytest.approx([500.0, -8.994], abs=0.001)
    assert math.isnan(trips[2])
    assert math.isnan(half_trip_ms([], [0], [0], [-1])[0])


def test_the_whole_trip_wants_both_halves() -> None:
    assert whole_trip_ms([20.0, 22.0, 300.0, math.nan], [-1.0, 1.0]) == 22.5
    assert math.isnan(whole_trip_ms([20.0], []))
    assert math.isnan(whole_trip_ms([20.0], [-500.0, math.nan]))


def test_reports_that_contradict_themselves_are_not_believed() -> None:
    rows = [
        # fraction, cumulative, highest reported, highest captured, half trip
        (0, 0, 1000, 1000, 20.0, ""),
        (10, 4, 1100, 1102, 21.0, ""),
        (0, 4, 1200, -1, math.nan, ""),
        (0, 4, 0x50000 | 1300, 1290, 20.0, ""),
        (9, 4, 0x50000 | 1400, 1400, 20.0, "it gives a fraction lost"),
        (0, 4, 0x50000 | 30_000, 1500, 20.0, "its highest sequence number is not of this stream"),
        (0, 4, 1600, 1600, 20.0, "its highest sequence number goes back"),
        (200, 900, 1700, 1700, 20.0, "it counts more packets lost"),
        (0, 900, 1800, 1800, -500.0, "its delay since the last sender report"),
        (0, 900, 1900, 1900, -5.0, ""),
    ]
    fraction, cumulative, highest, captured, trips, expected = (list(one) for one in zip(*rows, strict=True))
    found = doubts(fraction, between_reports(highest, cumulative), highest, captured, trips)
    assert [
        clause[: len(start)] if start else clause for clause, start in zip(found, expected, strict=True)
    ] == expected


def test_a_wrap_of_the_number_is_no_doubt() -> None:
    found = doubts([0, 0], between_reports([65_530, 65_550], [0, 0]), [65_530, 65_550], [65_535, 20], [math.nan] * 2)
    assert found == ["", ""]


def truth(name: str) -> dict[str, Any]:
    found: dict[str, Any] = json.loads((CAPTURES / f"{name}.truth.json").read_text())
    return found


def columns(rows: list[dict[str, Any]], *names: str) -> list[list[Any]]:
    return [[row[name] for row in rows] for name in names]


@pytest.mark.parametrize("name", ["xr-loss3.a", "rtp-pcma-20-rtcp.b", "clean-pcmu-udp.a", "combo-two-segments.b"])
def test_real_reports_give_the_round_trips_of_the_truth_and_no_doubts(name: str) -> None:
    """Round trips as the truth file has them, worked out from capture times and the fields of the reports."""
    told = truth(name)
    sent = [row for row in told["rtcp"] if row["type"] == "SR"]
    blocks = [
        {"t": row["t"], "reporter": row["src"], **block}
        for row in told["rtcp"]
        if row["type"] in ("SR", "RR")
        for block in row["blocks"]
    ]
    sent_ns = np.array([round(row["t"] * 1e6) * 1000 for row in sent])
    time_ns = np.array([round(row["t"] * 1e6) * 1000 for row in blocks])
    last, delay = columns(blocks, "lsr", "dlsr_65536")
    trips = half_trip_ms(
        sent_ns, time_ns, delay, referred_reports(last, time_ns, [row["ntp_mid32"] for row in sent], sent_ns)
    )
    expected = [row["rtt_ms_at_this_capture"] for row in told["rtt_from_rtcp"]]
    assert trips[~np.isnan(trips)].tolist() == pytest.approx(expected, abs=0.0011)
    assert len(expected) > 3
    shown = {
        (row["reporter"], row["t"]): row["capture_until_then"]["highest_seq"] for row in told["rtcp_beside_capture"]
    }
    for reporter in {block["reporter"] for block in blocks}:
        rows = [place for place, block in enumerate(blocks) if block["reporter"] == reporter]
        mine = [blocks[place] for place in rows]
        fraction, lost, highest = columns(mine, "fraction_lost_256", "cumulative_lost", "ext_highest_seq")
        captured = [shown.get((reporter, block["t"]), -1) for block in mine]
        assert max(captured) >= 0
        assert doubts(fraction, between_reports(highest, lost), highest, captured, trips[rows]) == [""] * len(rows)
