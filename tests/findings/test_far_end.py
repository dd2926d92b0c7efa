"""Rules about what the far receiver reports, with reports made octet by octet."""

import struct

import pytest

from tests import craft
from tests.findings.made import START_NS, Line, back, found, only

FAR_SSRC = 0x5E6F7081


def report(at_ms: float, line: Line, highest: int, lost: int, more: bytes = b""):
    """A receiver report on a stream by its receiver (RFC 3550, 6.4.2)."""
    body = (
        struct.pack("!BBHI", 0x81, 201, 7, FAR_SSRC) + struct.pack("!IIIIII", line.ssrc, lost, highest, 3, 0, 0) + more
    )
    source, destination = line.destination, line.source
    packet = craft.ipv4(craft.udp(body, source[1] + 1, destination[1] + 1), source[0], destination[0], ttl=60)
    return START_NS + int(at_ms * 1e6), craft.ethernet(packet)


def reports(line: Line, share: float, at=range(2000, 20_000, 2000)):
    """Reports of a receiver that missed a share of everything."""
    return [report(ms, line, ms // 20 - 1, int(share * ms / 20)) for ms in at]


@pytest.mark.parametrize(("share", "there"), [(0.003, False), (0.04, True)])
def test_loss_that_only_the_far_receiver_saw_lies_behind_the_capture(share, there) -> None:
    line = Line(count=1000)
    findings = found(line, back(count=1000), reports(line, share))
    assert [(one.finding, one.where) for one in findings] == [("random-loss", "after capture point")] * there
    if there:
        assert findings[0].measured == pytest.approx(100 * share, abs=0.5)
        assert findings[0].r_points > 5


def test_loss_in_one_interval_of_many_was_a_burst() -> None:
    line = Line(count=1000)
    told = [report(ms, line, ms // 20 - 1, 0 if ms < 9000 else 40) for ms in range(2000, 20_000, 2000)]
    one = found(line, back(count=1000), told)[0]
    assert (one.finding, one.where) == ("loss-burst", "after capture point")


def test_loss_before_the_capture_is_not_told_again_behind_it() -> None:
    line = Line(count=1000, lost=range(20, 1000, 33))
    told = [report(ms, line, ms // 20 - 1, len(range(20, ms // 20, 33))) for ms in range(2000, 20_000, 2000)]
    assert {one.where for one in found(line, back(count=1000), told)} == {"before capture point"}


def test_reports_of_numbers_that_were_never_sent_contradict() -> None:
    line = Line(count=1000)
    told = [report(ms, line, ms // 20 + 9000, 0) for ms in range(2000, 20_000, 2000)]
    one = only("rtcp-contradicts", found(line, back(count=1000), told))
    assert (one.severity, one.measured) == ("concern", 100.0)


def voice_quality(line: Line, **figures: int) -> bytes:
    """Voice-quality block (RFC 3611, 4.7) in an extended report."""
    part = {"discard": 0, "nominal": 0} | figures
    block = struct.pack("!BBHI", 7, 0, 8, line.ssrc)
    block += struct.pack("!BBBBHHHH", 0, part["discard"], 0, 0, 0, 0, 0, 0)
    block += struct.pack(
        "!bbBBBBBBBBHHH", 127, 127, 127, 16, 127, 127, 127, 127, 0, 0, part["nominal"], part["nominal"], 0
    )
    return struct.pack("!BBHI", 0x80, 207, 1 + len(block) // 4, FAR_SSRC) + block


def test_a_small_buffer_with_late_packets_that_the_receiver_reports_is_shallow() -> None:
    line = Line(count=1000)
    told = [report(8000, line, 399, 0, voice_quality(line, discard=13, nominal=10))]
    one = found(line, back(count=1000), told)[0]
    assert (one.finding, one.where, one.measured) == ("buffer-shallow", "endpoint", 10.0)
    assert "5.08 %" in one.says  # 13 of 256


def test_a_deep_buffer_that_the_receiver_reports_costs_points() -> None:
    line = Line(count=1000)
    told = [report(8000, line, 399, 0, voice_quality(line, nominal=300))]
    one = found(line, back(count=1000), told)[0]
    assert (one.finding, one.where, one.severity) == ("buffer-deep", "endpoint", "fault")
