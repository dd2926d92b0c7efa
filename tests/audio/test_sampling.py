import numpy as np

from rtpaudit.audio.sampling import payload_groups
from tests.audio.sounds import packets

OCTETS = np.arange(200, dtype=np.uint8).repeat(10)


def test_groups_are_spread_over_the_stream_and_hold_consecutive_payloads():
    octets, start, length, _ = packets(OCTETS, 10)
    groups = list(payload_groups(octets, start, length, 20, 3))
    assert [(rows.start, rows.stop) for rows, _ in groups] == [(0, 20), (80, 100), (180, 200)]
    for rows, payloads in groups:
        assert [one.tolist() for one in payloads] == [[row] * 10 for row in range(rows.start, rows.stop)]


def test_a_short_stream_is_one_group():
    octets, start, length, _ = packets(OCTETS[:70], 10)
    ((rows, payloads),) = payload_groups(octets, start, length, 20, 3)
    assert (rows.start, rows.stop, len(payloads)) == (0, 7, 7)
    ((_, nothing),) = payload_groups(octets, start[:0], length[:0], 20, 3)
    assert nothing == []


def test_payloads_that_leave_the_buffer_come_out_shorter():
    start, length = np.array([-5, 1995, 10**9]), np.array([10, 10, 10], np.int32)
    ((_, payloads),) = payload_groups(OCTETS, start, length, 20, 3)
    assert [len(one) for one in payloads] == [5, 5, 0]
