"""Streams that change their clock in mid-call."""

import numpy as np
import pytest

from rtpaudit.assess.media_time import common_ticks
from rtpaudit.assess.stream import measure
from rtpaudit.media.streams import Stream
from rtpaudit.profile import Profile
from tests.craft import rtp
from tests.media.datagrams import talk


def changed_over() -> Stream:
    """PCMU, an event, then a type that counts at 48 kHz from an origin of its own."""
    made = talk(range(100))
    made.add(2000.0, rtp(bytes([5, 0x8A, 3, 32]), 100, 16_000, payload_type=101))
    for n in range(50):
        made.add(2020.0 + 20.0 * n, rtp(bytes(70), 101 + n, 7_000_000 + 960 * n, payload_type=111))
    (stream,) = made.streams()
    return stream


def test_media_time_goes_on_over_a_change_of_clock():
    stream = changed_over()
    assert stream.clock_rate_hz == 8000
    assert np.diff(common_ticks(stream)).tolist() == [160] * 150


def test_a_change_of_clock_makes_no_packet_late():
    playback = measure(changed_over(), Profile()).playback
    assert playback is not None
    assert len(playback.discarded) == 0
    assert playback.played.mean_delay_ms == pytest.approx(Profile().playout.nominal_ms)
