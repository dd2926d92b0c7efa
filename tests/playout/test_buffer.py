import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.playout.buffer import play, talkspurts, transit
from rtpaudit.profile import Playout
from tests.naive import playout as naive

MS = 1_000_000
FRAME = 160
PAUSE = 1600


def stream(delays_ms, pauses_ms=(), packet_ms=20):
    """Packets sent every 20 ms with a pause before some, in order of arrival after the delays."""
    sent = np.arange(len(delays_ms)) * packet_ms
    for before, pause_ms in pauses_ms:
        sent[before:] += pause_ms
    arrived = sent * MS + np.rint(np.asarray(delays_ms) * MS).astype(np.int64)
    order = np.argsort(arrived, kind="stable")
    ticks, sequence = sent[order] * 8, order.astype(np.int64)
    segment = np.zeros(len(order), np.int32)
    return arrived[order], ticks, talkspurts(sequence, segment, ticks, np.full(len(order), packet_ms * 8), PAUSE)


def heard(delays_ms, pauses_ms=(), **settings):
    arrived, ticks, spurt = stream(delays_ms, pauses_ms)
    return play(arrived, ticks, spurt, 8000, Playout(**settings))


def test_an_even_stream_is_played_with_the_nominal_delay():
    result = heard(np.full(100, 35.0))
    assert result.played.all()
    assert result.mean_delay_ms == 60.0
    assert result.talkspurt_delay_ms.tolist() == [60.0]


def test_a_packet_at_its_deadline_is_played_and_one_later_is_not():
    delays = np.full(10, 20.0)
    delays[4], delays[6] = 80.0, 80.0 + 1e-6
    result = heard(delays)
    assert (~result.played).sum() == 1
    assert result.required_ns[~result.played].tolist() == [60 * MS + 1]


def test_the_delay_is_set_anew_after_a_pause_of_200_ms():
    delays = np.concatenate([np.full(50, 10.0), np.full(50, 90.0)])
    assert heard(delays, [(50, 180)]).played.sum() == 50
    assert heard(delays, [(50, 200)]).played.all()


def test_a_loss_is_not_a_pause():
    sequence = np.concatenate([np.arange(10), np.arange(30, 40)])
    ones = np.zeros(20, np.int32)
    assert set(talkspurts(sequence, ones, sequence * FRAME, np.full(20, FRAME), PAUSE)) == {0}


def test_a_loss_within_a_pause_leaves_the_pause():
    sequence = np.array([0, 1, 4])
    ticks = np.array([0, 160, 160 + 3 * 160 + 1600])
    assert talkspurts(sequence, np.zeros(3, np.int32), ticks, np.full(3, 160), PAUSE).tolist() == [0, 0, 1]


def test_comfort_noise_in_a_pause_is_no_loss():
    sequence, audio = np.arange(6), np.array([True, True, False, False, False, True])
    ticks = np.array([0, 160, 320, 1120, 1920, 2720])
    assert talkspurts(sequence, np.zeros(6, np.int32), ticks, np.full(6, 160), PAUSE, audio).tolist() == [0, 0, 1]


def test_a_new_segment_begins_a_talkspurt():
    segment = np.array([0, 0, 1, 1], np.int32)
    assert talkspurts(np.array([7, 8, 0, 1]), segment, np.arange(4) * 160, np.full(4, 160), PAUSE).tolist() == [
        0,
        0,
        1,
        1,
    ]


def test_the_packet_that_arrives_first_sets_the_clock_even_when_it_overtook():
    result = heard([90.0, 20.0, 20.0, 20.0])
    assert result.talkspurt_delay_ms.tolist() == [60.0]
    assert (~result.played).sum() == 1


def test_drift_is_followed_when_it_is_known():
    """A sender 200 ppm slow would run a 60 ms buffer dry within five minutes."""
    packets = 50 * 900
    ticks = np.arange(packets) * FRAME
    arrived = np.rint(np.arange(packets) * 20 * MS * (1 + 200e-6)).astype(np.int64)
    spurt = np.zeros(packets, np.int32)
    slow_ppm = (1 / (1 + 200e-6) - 1) * 1e6
    assert play(arrived, ticks, spurt, 8000, Playout()).played.mean() == pytest.approx(300 / 900, abs=0.01)
    followed = play(arrived, ticks, spurt, 8000, Playout(), skew_ppm=slow_ppm)
    assert followed.played.all()
    assert followed.mean_delay_ms == pytest.approx(60.0, abs=0.01)
    assert play(arrived, ticks, spurt, 8000, Playout(), float("nan")).played.mean() < 0.4


def test_the_ideal_buffer_loses_nothing_and_waits_no_longer_than_that():
    rng = np.random.default_rng(5)
    arrived, ticks, spurt = stream(rng.exponential(40, 400), [(100, 500), (300, 500)])
    result = play(arrived, ticks, spurt, 8000, Playout(kind="ideal"))
    assert result.played.all()
    for which in range(3):
        assert (result.playout_ns - arrived)[spurt == which].min() == 0


def test_an_adaptive_buffer_follows_a_spike_and_comes_back():
    delays = np.full(600, 20.0)
    delays[200:300] = np.linspace(400.0, 20.0, 100)  # a stall of 400 ms that the network works off
    pauses = [(k, 300) for k in range(20, 600, 20)]
    arrived, ticks, spurt = stream(delays, pauses)
    for kind in ("adaptive", "percentile"):
        result = play(arrived, ticks, spurt, 8000, Playout(kind=kind, maximum_ms=500.0))
        mouth_to_ear_ms = result.playout_ns / MS - ticks / 8
        assert result.played[320:].all()
        assert mouth_to_ear_ms[240:280].min() > 100
        assert mouth_to_ear_ms[-20:].max() < 60


def test_an_adaptive_buffer_adjusts_once_a_second_where_nobody_pauses():
    result = heard(np.concatenate([np.full(500, 10.0), np.full(500, 90.0)]), kind="adaptive")
    assert result.played[600:].all()
    assert result.talkspurt.max() == 19


@pytest.mark.parametrize("kind", ["fixed", "adaptive", "percentile", "ideal"])
def test_no_packets_and_one_packet_are_streams_too(kind):
    none = np.empty(0, np.int64)
    empty = play(none, none, none.astype(np.int32), 8000, Playout(kind=kind))
    assert len(empty.played) == len(empty.talkspurt_delay_ms) == 0
    assert np.isnan(empty.mean_delay_ms)
    assert heard([12.0], kind=kind).played.tolist() == [True]
    assert len(talkspurts(none, none.astype(np.int32), none, none, PAUSE)) == 0


def test_wild_clocks_are_bounded():
    ticks = np.array([0, 1 << 60, -(1 << 60), 160])
    passed = transit(np.array([0, 1 << 62, 5, 7]), ticks, 1)
    assert np.abs(passed).max() <= 1 << 58
    for kind in ("fixed", "adaptive", "percentile", "ideal"):
        play(np.array([0, 1 << 62, 5, 7]), ticks, np.array([0, 1, 2, 3], np.int32), 8000, Playout(kind=kind))


@st.composite
def arrivals(draw):
    """Any order, delays from none to a second, pauses, losses, restarts and packets without speech."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    count = draw(st.integers(1, 120))
    spread_ms = draw(st.sampled_from([0.3, 5.0, 40.0, 300.0]))
    sent = 20 * np.cumsum(1 + rng.choice([0, 1, 9, 10, 200], count, p=[0.8, 0.05, 0.05, 0.05, 0.05]))
    sequence = np.cumsum(1 + rng.choice([0, 1, 2, 12], count, p=[0.85, 0.06, 0.05, 0.04]))
    segment = np.cumsum(rng.random(count) < 0.02).astype(np.int32)
    delay = rng.exponential(spread_ms, count) + np.where(rng.random(count) < 0.03, 400.0, 0.0)
    arrived = sent * MS + np.rint(delay * MS).astype(np.int64)
    order = np.argsort(arrived, kind="stable")
    audio = rng.random(count) < 0.95
    return arrived[order], sent[order] * 8, sequence[order], segment[order], audio[order]


@settings(max_examples=150, deadline=None)
@given(arrivals())
def test_talkspurts_are_those_of_the_slow_twin(packets):
    _, ticks, sequence, segment, audio = packets
    ours = talkspurts(sequence, segment, ticks, np.full(len(ticks), FRAME), PAUSE, audio)
    theirs = naive.talkspurts(*(one.tolist() for one in (sequence, segment, ticks)), [FRAME] * len(ticks), PAUSE, audio)
    assert ours.tolist() == theirs


@settings(max_examples=150, deadline=None)
@given(arrivals(), st.sampled_from([0.0, 20.0, 60.0, 150.0]), st.sampled_from([5.0, 20.0]), st.sampled_from([0.5, 5.0]))
def test_every_packet_fares_as_with_the_slow_twin(packets, nominal_ms, minimum_ms, late_pct):
    arrived, ticks, sequence, segment, _ = packets
    spurt = talkspurts(sequence, segment, ticks, np.full(len(ticks), FRAME), PAUSE)
    passed = naive.transits(arrived.tolist(), ticks.tolist(), 8000)
    assert transit(arrived, ticks, 8000).tolist() == passed
    bounds = [round(ms * MS) for ms in (max(nominal_ms, minimum_ms), minimum_ms, 200.0)]
    twins = {
        "fixed": lambda spurts: naive.fixed(passed, spurts, round(nominal_ms * MS)),
        "ideal": lambda spurts: naive.ideal(passed, spurts),
        "adaptive": lambda spurts: naive.ramjee(passed, spurts, *bounds),
        "percentile": lambda spurts: naive.moon(passed, spurts, *bounds, 1.0 - late_pct / 100.0),
    }
    for kind, twin in twins.items():
        nominal = nominal_ms if kind in ("fixed", "ideal") else max(nominal_ms, minimum_ms)
        ours = play(arrived, ticks, spurt, 8000, Playout(kind, nominal, minimum_ms, 200.0, 200.0, late_pct))
        offset = twin(ours.talkspurt.tolist())
        slack = [offset[which] - now for which, now in zip(ours.talkspurt.tolist(), passed, strict=True)]
        assert ours.played.tolist() == [one >= 0 for one in slack]
        assert ours.playout_ns.tolist() == [at + one for at, one in zip(arrived.tolist(), slack, strict=True)]
        in_time = [one for one in slack if one >= 0]
        if in_time:
            assert ours.mean_delay_ms == pytest.approx(sum(in_time) / len(in_time) / MS, abs=1e-6)
