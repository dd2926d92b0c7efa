"""Payloads laid on the RTP timeline."""

import numpy as np

from rtpaudit.assess.laying import lay_out, sent_samples, silence_reason
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
