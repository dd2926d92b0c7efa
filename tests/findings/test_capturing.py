"""Rules about the capture itself, none of which may blame the network."""

import struct
from pathlib import Path

import numpy as np
import pytest

import rtpaudit
from rtpaudit.findings import diagnose
from rtpaudit.profile import Profile
from tests import craft
from tests.findings.made import START_NS, Line, back, found, names, only

HOLES = (120, 405, 533, 880)
LOST = [first + k for first in HOLES for k in range(6)]


def others(lost=()) -> list[Line]:
    """Another call between other ends."""
    there, here = ("203.0.113.5", 6000), ("203.0.113.99", 7000)
    return [
        Line(count=1000, lost=lost, source=there, destination=here, ssrc=0x99, first_ms=7),
        Line(count=1000, lost=lost, source=here, destination=there, ssrc=0x9A, first_ms=3),
    ]


def test_gaps_of_all_calls_at_once_are_the_captures() -> None:
    findings = found(Line(count=1000, lost=LOST), back(count=1000, lost=LOST), *others(LOST))
    mine = [one for one in findings if one.call == "c01"]
    assert mine[0].finding == "capture-drops"
    assert mine[0].where == "capture"
    assert {one.severity for one in mine if one.finding == "loss-both-ways"} <= {"remark", "concern"}


def test_gaps_of_one_call_alone_are_not() -> None:
    findings = found(Line(count=1000, lost=LOST), back(count=1000, lost=LOST), *others())
    assert "capture-drops" not in [one.finding for one in findings]


def test_drops_that_the_capture_host_counts_are_believed(tmp_path: Path) -> None:
    frames = sorted(Line(count=1000, lost=LOST).frames() + back(count=1000).frames())
    octets = craft.pcapng([frame for _, frame in frames], [at for at, _ in frames])
    for dropped, expected in ((0, "loss-burst"), (24, "capture-drops")):
        path = tmp_path / f"{dropped}.pcapng"
        path.write_bytes(octets + craft.pcapng_statistics(0, received=len(frames), dropped=dropped))
        assert diagnose(rtpaudit.audit(path, sound=False).assessment, Profile())[0].finding == expected


def test_a_capture_that_holds_all_twice_is_doubled_and_nothing_else() -> None:
    everything = range(500)
    findings = found(Line(copies=everything, copy_after_ms=0.1), back(copies=everything, copy_after_ms=0.1))
    assert [one.finding for one in findings] == ["capture-doubled"]
    assert findings[0].where == "capture"


def test_one_doubled_direction_is_told_as_well() -> None:
    findings = found(Line(copies=range(500), copy_after_ms=0.1), back())
    assert [one.finding for one in findings] == ["capture-doubled"]
    assert "1 stream" in findings[0].says


def test_copies_a_packet_time_later_are_the_networks() -> None:
    assert names(Line(copies=range(500), copy_after_ms=20), back()) == ["duplicates"]


def test_packets_cut_short_are_the_captures(tmp_path: Path) -> None:
    frames = sorted(Line().frames() + back().frames())
    path = tmp_path / "cut.pcap"
    path.write_bytes(
        craft.pcap([one[:96] for _, one in frames], [at for at, _ in frames], originals=[len(one) for _, one in frames])
    )
    one = only("capture-cut", diagnose(rtpaudit.audit(path, sound=False).assessment, Profile()))
    assert (one.severity, one.measured) == ("concern", 100.0)


def stepped(line: Line, at_ms: float, by_ms: float):
    return [(at + (int(by_ms * 1e6) if at >= START_NS + at_ms * 1e6 else 0), frame) for at, frame in line.frames()]


@pytest.mark.parametrize(("by_ms", "there"), [(25, False), (40, True), (900, True)])
def test_a_step_of_all_streams_at_once_is_the_captures_clock(by_ms, there) -> None:
    findings = found(stepped(Line(), 5000, by_ms), stepped(back(), 5000, by_ms))
    assert ([one.finding for one in findings[:1]] == ["capture-clock-step"]) is there
    if there:
        assert findings[0].measured == pytest.approx(by_ms, abs=2)
        assert "jitter-beyond-buffer" not in [one.finding for one in findings]


def test_a_step_back_shows_in_the_order_of_the_file() -> None:
    frames = sorted(Line().frames() + back().frames())
    turned = [(at - (700_000_000 if at >= START_NS + 5_000_000_000 else 0), frame) for at, frame in frames]
    one = found(turned, in_file_order=True)[0]
    assert one.finding == "capture-clock-step"
    assert "back by 700 ms" in one.says


def test_a_step_of_one_direction_alone_is_not_the_clocks() -> None:
    findings = found(Line(delay_ms=np.repeat([0.0, 80.0], [250, 250])), back())
    assert "capture-clock-step" not in [one.finding for one in findings]


def report(at_ms: float, reporter: int, about: int, highest: int, lost: int, source, destination):
    """A receiver report with one block (RFC 3550, 6.4.2)."""
    body = struct.pack("!BBHI", 0x81, 201, 7, reporter)
    body += struct.pack("!IIIIII", about, lost, highest, 3, 0, 0)
    ends = [(host, port + 1) for host, port in (source, destination)]
    packet = craft.ipv4(craft.udp(body, ends[0][1], ends[1][1]), ends[0][0], ends[1][0], ttl=60)
    return START_NS + int(at_ms * 1e6), craft.ethernet(packet)


def denials(line: Line):
    """Reports of a receiver that missed nothing."""
    ends = line.destination, line.source
    return [report(at, 0x5E6F7081, line.ssrc, at // 20, 0, *ends) for at in range(2000, 20_000, 3000)]


def test_reports_on_a_stream_that_is_not_here_tell_that_the_capture_is_half_blind() -> None:
    line = Line()
    reports = [report(at, line.ssrc, 0xABCDEF, 100 + at // 20, 0, line.source, line.destination) for at in (3000, 8000)]
    findings = found(line, reports)
    assert findings[0].finding == "capture-one-way"
    assert "one-way-media" not in [one.finding for one in findings if one.severity != "remark"]


def test_a_lone_stream_leaves_both_open() -> None:
    findings = found(Line())
    assert {one.finding for one in findings} == {"one-way-media", "capture-one-way"}
    assert {one.confidence_pct for one in findings} == {50.0}
    assert "would tell" in findings[0].check_next


def test_loss_that_the_far_receiver_denies_is_the_captures() -> None:
    line = Line(count=1000, lost=LOST)
    reports = [
        report(at, 0x5E6F7081, line.ssrc, at // 20, 0, line.destination, line.source)
        for at in range(2000, 20_000, 3000)
    ]
    one = found(line, back(count=1000), reports)[0]
    assert one.finding == "capture-drops"
    assert "reports that it got them" in one.says


def test_copies_that_hide_loss_from_the_receiver_are_no_denial() -> None:
    line = Line(count=1000, lost=LOST, copies=range(10, 900, 33))
    reports = [
        report(at, 0x5E6F7081, line.ssrc, at // 20, 0, line.destination, line.source)
        for at in range(2000, 20_000, 3000)
    ]
    assert "capture-drops" not in [one.finding for one in found(line, back(count=1000), reports)]
