import math
from contextlib import suppress

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.quality_reports import MediaEnd, parse_quality_report

RFC_6035_4_7_1 = """VQSessionReport: CallTerm
CallID: 6dg37f1890463
LocalID: Alice <sip:alice@example.org>
RemoteID: Bill <sip:bill@example.net>
OrigID: Alice <sip:alice@example.org>
LocalGroup: example-phone-55671
RemoteGroup: example-gateway-09871
LocalAddr: IP=192.0.2.100 PORT=5000 SSRC=1a3b5c7d
LocalMAC: 00:1f:5b:cc:21:0f
RemoteAddr:IP=192.0.2.150 PORT=5002 SSRC=0x2468abcd
RemoteMAC: 00:26:08:8e:95:02
LocalMetrics:
Timestamps:START=2004-10-10T18:23:43Z STOP=2004-10-01T18:26:02Z
SessionDesc:PT=0 PD=PCMU SR=8000 FD=20 FO=160 FPP=1 PPS=50
                PLC=3 SSUP=on
JitterBuffer:JBA=3 JBR=2 JBN=40 JBM=80 JBX=120
PacketLoss:NLR=5.0 JDR=2.0
BurstGapLoss:BLD=0 BD=0 GLD=2.0 GD=500 GMIN=16
Delay:RTD=200 ESD=140 SOWD=200 IAJ=2 MAJ=10
Signal:SL=-18 NL=-50 RERL=55
QualityEst:RLQ=88 RCQ=85 EXTRI=90 MOSLQ=4.1 MOSCQ=4.0
  QoEEstAlg=P.564
RemoteMetrics:
Timestamps:START=2004-10-10T18:23:43Z STOP=2004-10-01T18:26:02Z
JitterBuffer:JBA=3 JBR=2 JBN=40 JBM=80 JBX=120
PacketLoss:NLR=5.0 JDR=2.0
Signal:SL=-21 NL=-45 RERL=55
QualityEst:RLQ=90 RCQ=85 EXTRI=90 MOSLQ=4.3 MOSCQ=4.2
  QoEEstAlg=P.564
DialogID:1890463548@alice.example.org;to-tag=8472761;
  from-tag=9123dh311
""".replace("\n", "\r\n").encode()
"""The example of section 4.7.1 with documentation addresses; some lines of its remote part are left out."""

ALERT = RFC_6035_4_7_1.replace(b"VQSessionReport: CallTerm", b"VQAlertReport: Type=NLR Severity=Critical Dir=local")


def test_rfc_6035_4_7_1_session_report() -> None:
    report = parse_quality_report(RFC_6035_4_7_1, 7, "192.0.2.100:5060")
    assert (report.kind, report.final, report.call_id) == ("session", True, "6dg37f1890463")
    assert report.dialog_id == "1890463548@alice.example.org"
    assert (report.local_id, report.remote_id) == ("alice", "bill")
    assert report.local_end == MediaEnd("192.0.2.100", 5000, 0x1A3B5C7D)
    assert report.remote_end == MediaEnd("192.0.2.150", 5002, 0x2468ABCD)
    assert (report.time_ns, report.source, report.alert) == (7, "192.0.2.100:5060", "")
    local = report.local
    assert local.started_ns == 1_097_432_623_000_000_000
    assert (local.encoding, local.payload_type, local.frame_duration_ms) == ("PCMU", 0, 20)
    assert (local.packet_loss_concealment, local.frames_per_packet, local.packets_per_second) == (3, 1, 50)
    assert (local.playout_adaptive, local.playout_rate) == (3, 2)
    assert (local.playout_nominal_ms, local.playout_maximum_ms, local.playout_absolute_ms) == (40, 80, 120)
    assert (local.loss_pct, local.discard_pct) == (5.0, 2.0)
    assert (local.burst_density_pct, local.burst_duration_ms) == (0, 0)
    assert (local.gap_density_pct, local.gap_duration_ms, local.gap_threshold_packets) == (2.0, 500, 16)
    assert (local.round_trip_ms, local.end_system_delay_ms, local.symmetric_one_way_delay_ms) == (200, 140, 200)
    assert (local.jitter_ms, local.mean_absolute_jitter_ms) == (2, 10)
    assert (local.signal_level_dbm0, local.noise_level_dbm0, local.echo_return_loss_db) == (-18, -50, 55)
    assert (local.r_listening, local.r_factor, local.r_external_in) == (88, 85, 90)
    assert (local.mos_lq, local.mos_cq, local.estimated_by) == (4.1, 4.0, "P.564")
    assert math.isnan(local.one_way_delay_ms)
    assert local.set_aside == ()
    assert report.remote is not None
    assert (report.remote.mos_lq, report.remote.signal_level_dbm0) == (4.3, -21)


def test_rfc_6035_4_7_2_alert_report_says_what_it_was_raised_for() -> None:
    report = parse_quality_report(ALERT)
    assert (report.kind, report.final, report.alert) == ("alert", False, "Type=NLR Severity=Critical Dir=local")


def test_values_outside_their_range_are_set_aside_and_named() -> None:
    octets = RFC_6035_4_7_1.replace(b"NLR=5.0 JDR=2.0", b"NLR=104.2 JDR=2.0", 1).replace(b"RTD=200", b"RTD=70000")
    local = parse_quality_report(octets).local
    assert math.isnan(local.loss_pct)
    assert math.isnan(local.round_trip_ms)
    assert local.discard_pct == 2.0
    assert local.set_aside == ("NLR='104.2'", "RTD='70000'")


def test_a_report_without_remote_metrics_has_none() -> None:
    octets = RFC_6035_4_7_1[: RFC_6035_4_7_1.index(b"RemoteMetrics")]
    assert parse_quality_report(octets).remote is None


def test_times_that_are_none_are_left_out() -> None:
    octets = RFC_6035_4_7_1.replace(b"2004-10-10T18:23:43Z", b"yesterday")
    assert parse_quality_report(octets).local.started_ns is None


@pytest.mark.parametrize(
    "octets", [b"", b"VQSessionReport: CallTerm\r\n", b"LocalMetrics:\r\nDelay:RTD=1\r\n", b"\0" * 99]
)
def test_what_is_no_report_is_refused(octets: bytes) -> None:
    with pytest.raises(MalformedPacket):
        parse_quality_report(octets)


@pytest.mark.parametrize("end", range(0, len(RFC_6035_4_7_1), 7))
def test_every_prefix_is_read_or_refused(end: int) -> None:
    with suppress(MalformedPacket):
        parse_quality_report(RFC_6035_4_7_1[:end])


@settings(max_examples=200)
@given(st.integers(0, len(RFC_6035_4_7_1) - 1), st.binary(max_size=12))
def test_damaged_reports_are_read_or_refused(place: int, octets: bytes) -> None:
    with suppress(MalformedPacket):
        report = parse_quality_report(RFC_6035_4_7_1[:place] + octets + RFC_6035_4_7_1[place + len(octets) :])
        assert not report.local.loss_pct > 100
