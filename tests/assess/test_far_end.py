"""What far receivers reported, beside what the capture saw: real calls with the truth beside them."""

import json
from pathlib import Path

import numpy as np
import pytest

import rtpaudit

CAPTURES = Path(__file__).parents[2] / "fixtures" / "captures"


def audited(name):
    truth = json.loads((CAPTURES / f"{name}.truth.json").read_text())
    return rtpaudit.audit(CAPTURES / truth["file"]), truth


def stream_from(audit, source):
    (row,) = [row for row in audit.streams.itertuples() if row.source == source]
    return row


@pytest.mark.parametrize(
    "name", ["loss3-random.b", "combo-two-segments.a", "combo-two-segments.m", "combo-two-segments.b"]
)
def test_the_round_trip_is_that_of_the_line_wherever_it_was_captured(name):
    """Each of two segments delays by 10 ms one way: 40 ms there and back, and what the ends' processors add."""
    audit, _ = audited(name)
    assert audit.streams.delay_basis.tolist() == ["rtcp", "rtcp"]
    assert audit.streams.round_trip_ms.to_numpy() == pytest.approx([40.8, 40.8], abs=1.0)


def test_loss_behind_the_capture_point_is_what_only_the_receiver_misses():
    audit, truth = audited("xr-loss3.a")
    away = stream_from(audit, "192.0.2.10")
    assert away.packets_lost == 0
    assert away.loss_before_pct == 0
    assert away.loss_after_pct == pytest.approx(away.reported_loss_pct)
    (end,) = [one for one in truth["rtcp_last_report"] if one["about"] == away.ssrc]
    # The last report came before the last packets.
    assert away.loss_after_pct == pytest.approx(100 * end["cumulative_lost"] / away.packets_expected, abs=0.2)


def test_loss_before_the_capture_point_is_what_both_miss():
    audit, _ = audited("xr-loss3.a")
    here = stream_from(audit, "192.0.2.20")
    assert here.loss_after_pct == 0
    assert here.loss_before_pct == pytest.approx(here.loss_pct, abs=0.3)


@pytest.mark.parametrize("name", ["loss3-random.b", "combo-two-segments.a", "combo-two-segments.b"])
def test_each_report_block_of_the_truth_is_a_row(name):
    audit, truth = audited(name)
    ssrcs = {one["ssrc"] for one in truth["streams"]}
    expected = sorted(
        (one["about"], one["reported"]["cumulative_lost"], round(one["reported"]["fraction_lost_percent"], 2))
        for one in truth["rtcp_beside_capture"]
        if one["about"] in ssrcs
    )
    ssrc = dict(zip(audit.streams.stream, audit.streams.ssrc, strict=True))
    blocks = audit.reports[audit.reports.report.isin(["sender", "receiver"])]
    found = sorted((ssrc[row.stream], row.packets_lost, round(row.loss_pct, 2)) for row in blocks.itertuples())
    assert found == expected


def test_voice_quality_blocks_stand_beside_our_own_figures():
    audit, truth = audited("xr-loss3.a")
    extended = audit.reports[audit.reports.report == "extended"]
    assert len(extended) > 0
    last = {row.reporter: row for row in extended.itertuples()}
    blocks = [one for one in truth["xr_last"] if one["block"] == "VoIP metrics"]
    assert len(blocks) == 2
    for block in blocks:
        row = last[block["reporter"].split(":")[0]]
        assert row.r_factor == block["r_factor"]
        assert row.loss_pct == block["loss_rate_256"] * 100 / 256
        assert row.round_trip_ms == block["round_trip_delay_ms"]


def test_what_a_receiver_never_said_stays_empty():
    audit = rtpaudit.audit(CAPTURES / "pcmu-dtmf-two-way.pcap")
    assert np.isnan(audit.streams.round_trip_ms).all()
    assert audit.streams.delay_basis.tolist() == ["assumed", "assumed"]
    assert audit.streams.r_factor_low.lt(audit.streams.r_factor_high).all()
