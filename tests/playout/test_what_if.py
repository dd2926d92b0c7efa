import numpy as np
import pytest

from rtpaudit.playout.buffer import play, talkspurts
from rtpaudit.playout.what_if import what_if
from rtpaudit.profile import Playout
from tests.naive import playout as naive

MS = 1_000_000


def test_each_delay_is_charged_for_the_packets_that_need_more():
    """Ten packets, number 5 missing, needs of 0 to 45 ms: what a 20 ms buffer would have lost can be counted."""
    sequence = np.array([0, 1, 2, 3, 4, 6, 7, 8, 9])
    required = np.array([0, 30, 30, 0, 45, 45, 0, 20, 0]) * MS
    result = what_if(required, sequence, np.zeros(9, np.int32), delay_ms=np.array([0.0, 20.0, 30.0, 45.0, 60.0]))
    assert result.discard_pct.tolist() == [50.0, 40.0, 20.0, 0.0, 0.0]
    assert result.lost_pct.tolist() == [60.0, 50.0, 30.0, 10.0, 10.0]
    # runs: 1-2, 4-6, 8 | 1-2, 4-6 | 4-6 | 5 | 5
    assert result.burst_ratio.tolist() == pytest.approx([6 / 3 * 0.4, 5 / 2 * 0.5, 3 * 0.7, 0.9, 0.9])
    assert result.mean_delay_ms.tolist() == pytest.approx([0.0, 16.0, 30 - 80 / 7, 45 - 170 / 9, 60 - 170 / 9])


def test_nothing_lost_has_no_burst_ratio():
    result = what_if(np.zeros(5, np.int64), np.arange(5), np.zeros(5, np.int32))
    assert (result.lost_pct == 0).all()
    assert np.isnan(result.burst_ratio).all()


@pytest.mark.parametrize("seed", range(12))
def test_every_delay_gives_what_a_buffer_of_that_delay_gives(seed):
    rng = np.random.default_rng(seed)
    count = 300
    sequence = np.cumsum(1 + rng.choice([0, 1, 4], count, p=[0.9, 0.06, 0.04]))
    segment = np.cumsum(rng.random(count) < 0.01).astype(np.int32)
    sent = 20 * sequence + 400 * np.cumsum(rng.random(count) < 0.03)
    arrived = sent * MS + np.rint(rng.exponential(30, count) * MS).astype(np.int64)
    order = np.argsort(arrived, kind="stable")
    arrived, sequence, segment, ticks = arrived[order], sequence[order], segment[order], 8 * sent[order]
    audio = rng.random(count) < 0.9
    spurt = talkspurts(sequence, segment, ticks, np.full(count, 160), 1600, audio)
    arrivals = arrived[audio], ticks[audio], spurt, 8000
    required = play(*arrivals, Playout()).required_ns
    curve = what_if(required, sequence, segment, audio, np.array([0.0, 7.0, 60.0, 155.0]))
    for at, delay_ms in enumerate(curve.delay_ms):
        simulated = play(*arrivals, Playout(nominal_ms=float(delay_ms)))
        received = np.ones(count, bool)
        received[audio] = simulated.played
        expected = []
        for which in range(int(segment.max()) + 1):
            here = segment == which
            numbers = dict(zip(sequence[here].tolist(), received[here].tolist(), strict=True))
            expected += [numbers.get(n, False) for n in range(min(numbers), max(numbers) + 1)]
        assert curve.discard_pct[at] == pytest.approx(100 * (~simulated.played).sum() / len(expected))
        assert curve.lost_pct[at] == pytest.approx(100 * (1 - np.mean(expected)))
        assert curve.burst_ratio[at] == pytest.approx(naive.burst_ratio(expected))
        assert curve.mean_delay_ms[at] == pytest.approx(simulated.mean_delay_ms)
