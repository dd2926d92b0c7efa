import numpy as np
import pytest

from rtpaudit.codecs import g711
from rtpaudit.playout.timeline import CREEP_S, CREEP_SHARE, gather, lay, lay_by_table, positions, span

FRAME = 160
PACKET_NS = 20_000_000


def place(ticks, time_ns=None, segment=None, clock=8000, sampling=8000):
    ticks = np.asarray(ticks, np.int64)
    time_ns = np.arange(len(ticks)) * PACKET_NS if time_ns is None else np.asarray(time_ns, np.int64)
    segment = np.zeros(len(ticks), np.int32) if segment is None else np.asarray(segment, np.int32)
    return positions(ticks, time_ns, clock, sampling, segment)


def steady(packets):
    return np.arange(packets, dtype=np.int64) * FRAME, np.arange(packets, dtype=np.int64) * PACKET_NS


def test_payloads_are_gathered_in_the_order_asked_for():
    octets = np.arange(20, dtype=np.uint8)
    payloads, offsets = gather(octets, np.array([10, 2]), np.array([3, 2], np.int32))
    assert payloads.tolist() == [10, 11, 12, 2, 3]
    assert offsets.tolist() == [0, 3, 5]


def test_a_payload_that_leaves_the_buffer_is_cut_short():
    octets = np.arange(20, dtype=np.uint8)
    start, length = np.array([18, 400, 5, -7]), np.array([9, 9, -1, 2], np.int32)
    payloads, offsets = gather(octets, start, length)
    assert payloads.tolist() == [18, 19, 0, 1]
    assert offsets.tolist() == [0, 2, 2, 2, 4]


def test_nothing_gathers_to_nothing():
    payloads, offsets = gather(np.empty(0, np.uint8), np.empty(0, np.int64), np.empty(0, np.int32))
    assert len(payloads) == 0
    assert offsets.tolist() == [0]
    assert len(place([])) == 0
    assert span(np.empty(0, np.int64), np.empty(0, np.int64)) == 0


def test_what_lies_outside_the_timeline_is_left_out():
    samples = np.arange(1, 9, dtype=np.int16)
    timeline = lay(samples, np.array([0, 4, 8]), np.array([-2, 4]), 6)
    assert timeline.tolist() == [3, 4, 0, 0, 5, 6]


def test_one_pass_lays_what_three_passes_lay():
    rng = np.random.default_rng(11)
    octets = rng.integers(0, 256, 5000, dtype=np.uint8)
    start = rng.integers(0, 5000, 40)
    length = rng.integers(0, 200, 40).astype(np.int32)
    position = rng.integers(-100, 6000, 40)
    payloads, offsets = gather(octets, start, length)
    expected = lay(g711.decode_pcma(payloads), offsets, position, 5900)
    np.testing.assert_array_equal(
        lay_by_table(g711.PCMA_SAMPLES, octets, start, length, position, 5900),
        expected,
    )
    half = lay_by_table(g711.PCMA_SAMPLES, octets, start[:20], length[:20], position[:20], 5900)
    both = lay_by_table(g711.PCMA_SAMPLES, octets, start[20:], length[20:], position[20:], 5900, onto=half)
    np.testing.assert_array_equal(both, expected)


def test_a_lost_packet_leaves_exactly_its_length_of_silence():
    ticks = np.array([0, 160, 480])
    timeline = lay(np.ones(3 * FRAME, np.int16), np.arange(4) * FRAME, place(ticks), 640)
    assert timeline[:320].all()
    assert not timeline[320:480].any()
    assert timeline[480:].all()


def test_a_pause_leaves_exactly_its_length_however_late_the_packet_after_it():
    ticks, time_ns = steady(10)
    ticks[5:] += 8000
    time_ns[5:] += 1_000_000_000 + 37_000_000
    assert place(ticks, time_ns).tolist() == ticks.tolist()


def test_order_of_arrival_and_copies_change_nothing():
    ticks, time_ns = steady(8)
    shuffled = ticks[[0, 2, 1, 1, 3, 5, 6, 4]]
    assert place(shuffled, time_ns).tolist() == shuffled.tolist()


def test_a_first_packet_that_was_overtaken_lies_before_its_overtaker():
    assert place([160, 0, 320], np.arange(3) * PACKET_NS).tolist() == [160, 0, 320]


def test_a_timestamp_ten_minutes_further_is_laid_at_its_arrival():
    ticks, time_ns = steady(100)
    ticks[50:] += 600 * 8000
    assert place(ticks, time_ns).tolist() == (np.arange(100) * FRAME).tolist()


def test_a_timestamp_that_goes_back_is_laid_at_its_arrival():
    ticks, time_ns = steady(3000)
    ticks[2000:] -= 2000 * FRAME
    assert place(ticks, time_ns).tolist() == (np.arange(3000) * FRAME).tolist()


def test_a_timestamp_that_stood_still_on_hold_is_laid_at_its_arrival():
    ticks, time_ns = steady(2000)
    time_ns[1000:] += 8_000_000_000
    expected = np.arange(2000) * FRAME
    expected[1000:] += 64_000
    assert place(ticks, time_ns).tolist() == expected.tolist()


def test_a_stray_timestamp_does_not_move_those_that_follow():
    ticks, time_ns = steady(1000)
    expected = ticks.copy()
    ticks[400] += 1_000_000_000
    ticks[600] -= 1_000_000_000
    assert place(ticks, time_ns).tolist() == expected.tolist()


@pytest.mark.parametrize("row", [0, 1, 400, 998, 999])
@pytest.mark.parametrize("off_s", [-86_400, -60, 60, 86_400])
def test_a_stray_arrival_does_not_move_anything(row, off_s):
    ticks, time_ns = steady(1000)
    time_ns[row] += off_s * 1_000_000_000
    assert place(ticks, time_ns).tolist() == ticks.tolist()


@pytest.mark.parametrize("off_s", [-86_400, 86_400, 50 * 31_556_952])
def test_a_capture_clock_that_was_set_leaves_the_sound_whole(off_s):
    ticks, time_ns = steady(1000)
    time_ns[400:] += off_s * 1_000_000_000
    assert place(ticks, time_ns).tolist() == ticks.tolist()


def test_packets_held_up_for_six_seconds_keep_their_media_time():
    ticks, time_ns = steady(1000)
    time_ns[200:500] = time_ns[500] - np.arange(300, 0, -1) * 10_000
    assert place(ticks, time_ns).tolist() == ticks.tolist()


def test_a_step_of_the_capture_clock_does_not_move_the_media():
    ticks, time_ns = steady(500)
    time_ns[250:] += 1_500_000_000
    assert place(ticks, time_ns).tolist() == ticks.tolist()


def test_drift_over_ten_hours_does_not_move_the_media():
    packets = 10 * 3600 * 50
    ticks, time_ns = steady(packets)
    assert np.array_equal(place(ticks, (time_ns * 1.0005).astype(np.int64)), ticks)


def test_a_new_segment_is_laid_at_its_arrival():
    ticks, time_ns = steady(100)
    segment = (np.arange(100) >= 60).astype(np.int32)
    ticks[60:] += 123_456_789
    time_ns[60:] += 5_000_000_000
    expected = np.arange(100) * FRAME
    expected[60:] += 40_000
    assert place(ticks, time_ns, segment).tolist() == expected.tolist()


def test_a_new_segment_that_goes_on_in_time_is_not_moved_by_its_jitter():
    ticks, time_ns = steady(100)
    segment = (np.arange(100) >= 60).astype(np.int32)
    time_ns[60] += 30_000_000
    assert place(ticks, time_ns, segment).tolist() == ticks.tolist()


def test_a_new_piece_does_not_begin_inside_the_packet_before_it():
    ticks, time_ns = steady(10)
    ticks[5:] += 600 * 8000
    time_ns[5:] -= 12_000_000
    assert place(ticks, time_ns).tolist() == (np.arange(10) * FRAME).tolist()


@pytest.mark.parametrize(("clock", "sampling"), [(8000, 16000), (48000, 48000), (90000, 8000), (16000, 8000)])
def test_positions_count_samples_not_ticks(clock, sampling):
    ticks = np.arange(50) * clock // 50
    assert place(ticks, clock=clock, sampling=sampling).tolist() == (np.arange(50) * sampling // 50).tolist()


@pytest.mark.parametrize("seed", range(20))
def test_no_timestamps_ask_for_more_than_the_arrivals_explain(seed):
    rng = np.random.default_rng(seed)
    kind = seed % 4
    step = [rng.integers(-(2**31), 2**31, 400), rng.integers(-24_500, 24_500, 400), np.full(400, 23_990),
            rng.choice([160, -23_000, 10**9, -(10**9)], 400)][kind]  # fmt: skip
    ticks, time_ns = np.cumsum(step), np.cumsum(rng.integers(0, 40_000_000, 400))
    where = place(ticks, time_ns, np.cumsum(rng.random(400) < 0.01))
    arrivals_s = (time_ns[-1] - time_ns[0]) / 1e9
    assert where.min() == 0
    assert where.max() / 8000 <= (1 + CREEP_SHARE) * arrivals_s + 2 * CREEP_S
