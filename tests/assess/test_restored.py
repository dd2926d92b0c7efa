"""Lost packets that came within others: counted, rated and heard, or too late, by hand."""

import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import rtpaudit
from rtpaudit.assess.ear import heard_samples
from rtpaudit.assess.laying import lay_out, sent_samples
from rtpaudit.assess.stream import Measured, measure
from rtpaudit.codecs.g711 import decode_pcmu
from rtpaudit.media.streams import Stream
from rtpaudit.profile import Playout, Profile
from rtpaudit.signalling.payload_types import encoding
from tests.crafted_calls import Made, capture
from tests.media.datagrams import Datagrams
from tests.media.test_redundancy import GIVEN, content_of, red, redundant

PLAIN = Profile()


def stream_of(made: Datagrams) -> Stream:
    (stream,) = made.streams(GIVEN)
    return stream


def measured(made: Datagrams, profile: Profile = PLAIN) -> Measured:
    return measure(stream_of(made), profile)


LOST = [20, 21, 40, 60]
MADE = redundant([number for number in range(150) if number not in LOST], (1, 2))


def with_buffer(nominal_ms: float) -> Profile:
    return replace(PLAIN, playout=Playout(kind="fixed", nominal_ms=nominal_ms))


def test_losses_stay_as_received_and_what_came_back_is_counted() -> None:
    figures = measured(MADE).figures
    assert (figures.packets_lost, figures.packets_recovered) == (4, 4)
    assert figures.loss_pct == pytest.approx(100 * 4 / 150)


def test_the_rating_counts_what_the_ear_missed() -> None:
    one = measured(MADE)
    assert one.lost_to_the_ear == 0
    assert one.path(PLAIN).loss_pct == 0.0
    assert np.isnan(one.figures.burst_ratio)


@pytest.mark.parametrize(("nominal_ms", "restored"), [(60.0, 4), (40.0, 4), (30.0, 3), (20.0, 3), (10.0, 0)])
def test_a_copy_is_of_use_where_it_comes_in_time(nominal_ms: float, restored: int) -> None:
    """Copies come 20 ms after the packet was due; that of packet 20, whose successor is lost too, 40 ms."""
    one = measured(MADE, with_buffer(nominal_ms))
    assert one.playback is not None
    assert one.playback.restored_packets == restored
    assert one.lost_to_the_ear == 4 - restored
    assert one.path(PLAIN).loss_pct == pytest.approx(100 * (4 - restored) / 150)
    assert one.playback.discard_pct == 0.0


def test_windows_add_up_to_the_stream() -> None:
    one = measured(MADE, with_buffer(30.0))
    assert one.playback is not None
    assert one.playback.restored is not None
    windows = one.network.windows.packets_lost + one.playback.missed_per_window
    assert windows.sum() == one.lost_to_the_ear == 1
    assert (windows >= 0).all()


def test_other_buffers_are_tried_with_the_copies() -> None:
    one = measured(MADE, with_buffer(10.0))
    assert one.playback is not None
    tried = one.playback.other_buffers()
    lost = dict(zip(tried.delay_ms.tolist(), np.rint(tried.lost_pct * 1.5).tolist(), strict=True))
    assert (lost[10.0], lost[20.0], lost[30.0], lost[40.0]) == (4, 1, 1, 0)


def test_a_stream_without_copies_has_nothing_to_restore() -> None:
    made = redundant([number for number in range(50) if number != 20], ())
    one = measured(made)
    assert one.playback is not None
    assert one.playback.restored is None
    assert one.lost_to_the_ear == one.network.packets_lost == 1


def test_recovered_packets_are_in_the_sound_at_their_place() -> None:
    stream = stream_of(MADE)
    laid = lay_out(stream)
    sent = sent_samples(stream, laid, [MADE.packets().octets])
    expected = np.concatenate([decode_pcmu(np.frombuffer(content_of(number), np.uint8)) for number in range(150)])
    assert np.array_equal(sent, expected)


def test_what_came_too_late_is_not_heard() -> None:
    for nominal_ms, silent in ((60.0, []), (30.0, [20]), (10.0, LOST)):
        one = measured(MADE, with_buffer(nominal_ms))
        laid = lay_out(one.stream)
        buffers = [MADE.packets().octets]
        sent = sent_samples(one.stream, laid, buffers)
        heard = heard_samples(
            one.stream, one.playback, sent, laid.rows, laid.position, laid.rate_hz, buffers, conceals_loss=False
        )
        # 127 is silence in mu-law.
        assert [k for k in range(150) if not heard[160 * k : 160 * (k + 1)].any()] == sorted([*silent, 127])


@pytest.mark.parametrize("told", ["offer", "given"])
def test_a_whole_audit_of_a_capture_with_redundancy(tmp_path: Path, told: str) -> None:
    call = Made(1, seconds=3.0)
    datagrams = []
    for one in call.all():
        payload = one.payload
        if told == "offer" and b"RTP/AVP 0 101" in payload:
            head, _, body = payload.partition(b"\r\n\r\n")
            body = body.replace(b"AVP 0 101", b"AVP 121 0 101") + b"a=rtpmap:121 red/8000\r\na=fmtp:121 0/0\r\n"
            payload = re.sub(rb"Content-Length: \d+", b"Content-Length: %d" % len(body), head) + b"\r\n\r\n" + body
        if one.source[1] == call.ports[0]:
            number = int.from_bytes(payload[2:4], "big")
            copies = red((0, payload[12:]), (0, 160, content_of(number - 1)))
            payload = payload[:1] + bytes([121]) + payload[2:12] + copies
            if number in (50, 51, 80):
                continue
        datagrams.append(one._replace(payload=payload))
    (tmp_path / "made.pcap").write_bytes(capture(datagrams))
    given = {121: encoding("red", 8000)} if told == "given" else {}
    audit = rtpaudit.audit(tmp_path / "made.pcap", payload_types=given)
    row = audit.streams[audit.streams.source_port == call.ports[0]].iloc[0]
    assert (row.encoding, row.payload_type, row.packets_lost, row.packets_recovered) == ("PCMU", 0, 3, 2)
    windows = audit.windows[audit.windows.stream == row.stream]
    assert windows.packets_lost.sum() == 3
    sent = audit.samples(row.stream)
    assert not sent[50 * 160 : 51 * 160].any(), "its copy was lost with the packet after it"
    assert np.array_equal(sent[51 * 160 : 52 * 160], decode_pcmu(np.frombuffer(content_of(51), np.uint8)))
