"""Payloads laid on the RTP timeline."""

import numpy as np
import pytest

from rtpaudit.assess.laying import lay_out, sent_samples, silence_reason
from rtpaudit.media.find import find_streams
from rtpaudit.media.rtp import RtpCollector
from tests.craft import rtp
from tests.media.datagrams import MS, START_MS, Datagrams, talk


def test_two_channels_that_alternate_become_their_mean():
    made = Datagrams()
    left, right = np.arange(220) * 10, np.full(220, -300)
    frame = np.stack([left, right], axis=1).astype(">i2").tobytes()
    for n in range(6):
        made.add(5.0 * n, rtp(frame, n, 220 * n, payload_type=10))
    (stream,) = made.streams()
    sent = sent_samples(stream, lay_out(stream), [made.packets().octets])
    assert stream.encoding == "L16"
    assert sent.tolist() == ((left + right) // 2).tolist() * 6


def test_a_wrong_time_does_not_move_the_origin():
    for wrong_s in (-86_400, 86_400):
        made = talk(range(200))
        at_ms, payload, flow, interface = made.rows[100]
        made.rows[100] = (at_ms + 1000.0 * wrong_s, payload, flow, interface)
        (stream,) = made.streams()
        laid = lay_out(stream)
        assert laid.position.max() == 199 * 160
        assert laid.origin_ns == round(START_MS * MS)


def test_a_clock_that_was_set_leaves_the_origin_where_the_stream_began():
    made = talk(range(200))
    made.rows = [(row[0] + 1e12 * (n >= 60), *row[1:]) for n, row in enumerate(made.rows)]
    (stream,) = made.streams()
    laid = lay_out(stream)
    assert laid.position.max() == 199 * 160
    assert laid.origin_ns == round(START_MS * MS)


def test_an_unknown_payload_type_says_how_to_name_it():
    made = Datagrams()
    for n in range(20):
        made.add(20.0 * n, rtp(bytes(70), n, 960 * n, payload_type=111))
    (stream,) = made.streams()
    assert "--payload-type 111=" in silence_reason(stream)


def test_a_change_to_another_sampling_rate_is_heard_and_moves_nothing():
    """PCMU, then G.722 of a tone of 500 Hz, which the sender encodes at 16 kHz."""
    other = pytest.importorskip("G722")
    tone = np.rint(8000 * np.sin(2 * np.pi * 500 * np.arange(16_000) / 16_000)).astype(int)
    octets = other.G722(16000, 64000).encode(tone.tolist())
    made = talk(range(100))
    for n in range(50):
        made.add(2000.0 + 20.0 * n, rtp(octets[160 * n : 160 * (n + 1)], 100 + n, 16_000 + 160 * n, payload_type=9))
    (stream,) = made.streams()
    sent = sent_samples(stream, lay_out(stream), [made.packets().octets])
    assert (stream.encoding, len(sent)) == ("PCMU", 24_000)
    alone = sent_samples(*_laid(talk(range(100))))
    assert sent[:16_000].tolist() == alone.tolist()
    spectrum = np.abs(np.fft.rfft(sent[16_400:23_600] * np.hanning(7200)))
    assert spectrum.argmax() * 8000 / 7200 == pytest.approx(500, abs=2)


def test_a_decoder_goes_on_from_one_file_of_a_ring_to_the_next():
    whole, parts = Datagrams(), (Datagrams(), Datagrams())
    octets = np.random.default_rng(6).bytes(16_000)
    for n in range(100):
        packet = rtp(octets[160 * n : 160 * (n + 1)], n, 160 * n, payload_type=9)
        whole.add(20.0 * n, packet)
        parts[n >= 50].add(20.0 * n, packet)
    collector = RtpCollector()
    for number, part in enumerate(parts):
        collector.add(part.packets(), number)
    buffers = [part.packets().octets for part in parts]
    (stream,) = find_streams(collector, whole.flows(), buffers)
    assert np.array_equal(sent_samples(stream, lay_out(stream), buffers), sent_samples(*_laid(whole)))


def _laid(made: Datagrams):
    (stream,) = made.streams()
    return stream, lay_out(stream), [made.packets().octets]
