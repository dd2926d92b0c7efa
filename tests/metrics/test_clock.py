"""The clock rate from timestamps against arrivals, under jitter, loss, pauses, and where there is none."""

import numpy as np
import pytest

from rtpaudit.metrics.clock import CLOCK_RATES_HZ, infer_clock_rate

PACED = [
    (8000, 10),
    (8000, 20),
    (8000, 30),
    (8000, 60),
    (16000, 20),
    (32000, 20),
    (44100, 20),
    (48000, 20),
    (48000, 60),
]


def arrivals(rate_hz, packet_ms, packets, jitter_ms=0.0, seed=1, pauses=False):
    """Arrivals and timestamps as on the wire, near the wrap of the timestamps, every tenth packet lost."""
    chance = np.random.default_rng(seed)
    media_s = np.arange(packets) * packet_ms / 1000
    if pauses:
        media_s = media_s + np.cumsum(chance.random(packets) < 0.03) * 0.7
    wire = ((2**32 - 500 + np.rint(media_s * rate_hz).astype(np.int64)) % 2**32).astype(np.uint32)
    time_ns = np.rint((media_s + chance.exponential(jitter_ms / 1000, packets)) * 1e9).astype(np.int64)
    order = np.argsort(time_ns, kind="stable")
    order = order[chance.random(packets)[order] >= 0.1]
    return time_ns[order], wire[order]


@pytest.mark.parametrize(("rate_hz", "packet_ms"), PACED)
def test_twelve_packets_tell_the_rate(rate_hz, packet_ms) -> None:
    assert infer_clock_rate(*arrivals(rate_hz, packet_ms, 12, jitter_ms=1.0)) == rate_hz


@pytest.mark.parametrize(("rate_hz", "packet_ms"), PACED)
@pytest.mark.parametrize("seed", range(5))
def test_a_longer_stream_tells_it_through_jitter_loss_and_pauses(rate_hz, packet_ms, seed) -> None:
    assert infer_clock_rate(*arrivals(rate_hz, packet_ms, 100, 20.0, seed, pauses=True)) == rate_hz


@pytest.mark.parametrize("seed", range(20))
def test_jitter_does_not_turn_44_1_into_48_khz(seed) -> None:
    for rate_hz in (44100, 48000):
        assert infer_clock_rate(*arrivals(rate_hz, 20, 12, 5.0, seed)) == rate_hz


def test_video_frames_of_several_packets_run_at_90_khz() -> None:
    frame = np.repeat(np.arange(30), 4)
    time_ns = frame * 33_366_667 + np.tile([0, 100_000, 200_000, 300_000], 30)
    assert infer_clock_rate(time_ns, (frame * 3003).astype(np.uint32)) == 90000


def test_unwrapped_timestamps_will_do() -> None:
    assert infer_clock_rate(np.arange(20) * 20_000_000, np.arange(20) * 160 + 2**33) == 8000


@pytest.mark.parametrize("rate_hz", [4000, 12000, 24000, 64000, 120_000])
def test_a_rate_that_is_not_in_use_is_not_named(rate_hz) -> None:
    assert infer_clock_rate(*arrivals(rate_hz, 20, 200)) == 0


def test_where_nothing_can_be_told_it_is_0() -> None:
    still = np.zeros(10, np.uint32)
    assert infer_clock_rate([], np.empty(0, np.uint32)) == 0
    assert infer_clock_rate([5], still[:1]) == 0
    assert infer_clock_rate(np.arange(10) * 20_000_000, still) == 0
    assert infer_clock_rate(np.zeros(10), (np.arange(10) * 160).astype(np.uint32)) == 0
    noise = np.random.default_rng(9).integers(0, 2**32, 200).astype(np.uint32)
    assert infer_clock_rate(np.arange(200) * 20_000_000, noise) == 0


def test_the_rates_are_those_that_are_promised() -> None:
    assert CLOCK_RATES_HZ == (8000, 16000, 32000, 44100, 48000, 90000)
