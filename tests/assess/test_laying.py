"""Payloads laid on the RTP timeline."""

import numpy as np

from rtpaudit.assess.laying import lay_out, sent_samples
from tests.craft import rtp
from tests.media.datagrams import Datagrams


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
