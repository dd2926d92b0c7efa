import numpy as np

from rtpaudit.playout.concealment import conceal
from rtpaudit.playout.heard import heard, lost_stretches, noise_stretches

FRAME = 160


def stretches(sequence, position=None, samples=None, segment=None, late=()):
    sequence = np.asarray(sequence, np.int64)
    position = sequence * FRAME if position is None else np.asarray(position, np.int64)
    samples = np.full(len(sequence), FRAME) if samples is None else np.asarray(samples, np.int64)
    segment = np.zeros(len(sequence), np.int32) if segment is None else np.asarray(segment, np.int32)
    played = ~np.isin(sequence, late)
    begin, end = lost_stretches(position, samples, sequence, segment, played)
    return list(zip(begin.tolist(), end.tolist(), strict=True))


def test_missing_and_late_packets_in_a_row_are_one_stretch():
    assert stretches([0, 1, 4, 5, 7, 8], late=[4]) == [(320, 800), (960, 1120)]


def test_order_of_arrival_does_not_matter():
    assert stretches([4, 0, 8, 1, 7, 5], late=[4]) == [(320, 800), (960, 1120)]


def test_a_pause_is_not_lost():
    assert stretches([0, 1, 2], [0, 160, 5000]) == []


def test_a_loss_before_a_pause_is_as_long_as_its_packets():
    assert stretches([0, 1, 4], [0, 160, 5000]) == [(320, 640)]


def test_a_gap_between_unlike_packets_is_lost_as_a_whole():
    """A packet of 20 ms, one of 30 ms missing, one of 30 ms."""
    assert stretches([0, 2], [0, 400], [160, 240]) == [(160, 400)]


def test_a_gap_after_comfort_noise_or_an_event_is_a_pause():
    assert stretches([0, 1, 4], [0, 160, 5000], [160, 0, 160]) == []


def test_a_new_segment_and_a_jump_back_are_no_loss():
    assert stretches([0, 1, 9], [0, 160, 9000], segment=[0, 0, 1]) == []
    assert stretches([0, 1, 9], [5000, 5160, 100]) == []


def test_no_packets_lose_nothing():
    assert stretches([]) == []
    assert stretches([5]) == []
    assert stretches([5], late=[5]) == [(800, 960)]


def test_noise_lasts_until_the_next_packet():
    position, sequence = np.array([0, 160, 1000, 2000]), np.arange(4)
    noise = np.array([False, True, True, False])
    begin, end = noise_stretches(position, sequence, np.zeros(4, np.int32), noise, 2160)
    assert begin.tolist() == [160, 1000]
    assert end.tolist() == [1000, 2000]
    begin, end = noise_stretches(position, sequence, np.zeros(4, np.int32), ~noise, 2160)
    assert end.tolist() == [160, 2160]


def test_what_came_too_late_is_not_heard():
    sent = np.arange(1, 801, dtype=np.int16)
    silent = heard(sent, (np.array([160, 640]), np.array([320, 900])), conceals=False)
    assert not silent[160:320].any()
    assert not silent[640:].any()
    np.testing.assert_array_equal(silent[320:640], sent[320:640])
    np.testing.assert_array_equal(silent[:160], sent[:160])


def test_concealment_fills_what_was_lost():
    sent = np.round(5000 * np.sin(np.arange(8000) / 7)).astype(np.int16)
    lost = np.zeros(100, bool)
    lost[30:32] = True
    filled = heard(sent, (np.array([2400]), np.array([2560])), conceals=True)
    np.testing.assert_array_equal(filled, conceal(sent, lost))
    assert len(filled) == len(sent)
