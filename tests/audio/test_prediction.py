import numpy as np
import pytest

from rtpaudit.audio.prediction import predictors


def test_the_filter_is_that_of_the_normal_equations():
    from scipy.linalg import solve_toeplitz

    frames = np.random.default_rng(2).normal(0, 1000, (5, 200)).cumsum(axis=1)
    filters, gain = predictors(frames, 6)
    window = np.hanning(202)[1:-1]
    for frame, found, gained in zip(frames, filters, gain, strict=True):
        x = (frame - frame.mean()) * window
        lags = np.array([x[: 200 - k] @ x[k:] for k in range(7)])
        lags[0] = lags[0] * (1 + 1e-5) + 1e-3
        expected = solve_toeplitz(lags[:6], -lags[1:])
        assert found[1:] == pytest.approx(expected, abs=1e-6)
        assert gained == pytest.approx(10 * np.log10(lags[0] / (lags[0] + expected @ lags[1:])), abs=1e-4)


def test_silence_and_white_noise_are_not_predictable_and_a_tone_is():
    time = np.arange(256)
    frames = np.stack([np.zeros(256), np.random.default_rng(1).normal(0, 99, 256), 999 * np.sin(0.3 * time)])
    gain = predictors(frames, 8)[1]
    assert gain[0] == pytest.approx(0, abs=1e-9)
    assert gain[1] < 1
    assert gain[2] > 30
