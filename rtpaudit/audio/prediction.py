"""Linear prediction of short frames: how much of the next sample the ones before it tell."""

import numpy as np
from numpy.typing import NDArray

Frames = NDArray[np.float64]


def predictors(frames: Frames, order: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Prediction error filters and prediction gains by the autocorrelation method.

    Parameters
    ----------
    frames : float array, shape (n, length)
    order : int
        Samples that the prediction is made from.

    Returns
    -------
    filters : float array, shape (n, order + 1)
        The first coefficient is 1.
    gain_db : float array, shape (n,)
        Power of the frame over that of the prediction error; 0 for white noise and for silence. [dB]

    Notes
    -----
    Hann window, lags by FFT, Levinson-Durbin recursion for all frames at once: textbook methods, common practice.
    """
    length = frames.shape[1]
    centred = (frames - frames.mean(axis=1, keepdims=True)) * np.hanning(length + 2)[1:-1]
    size = 1 << (length + order).bit_length()
    power = np.abs(np.fft.rfft(centred, size, axis=1)) ** 2
    lags = np.fft.irfft(power, size, axis=1)[:, : order + 1]
    # White noise 50 dB below the frame keeps the recursion of a pure tone stable.
    error = lags[:, 0] * (1.0 + 1e-5) + 1e-3
    whole = error.copy()
    filters = np.zeros((len(frames), order + 1))
    filters[:, 0] = 1.0
    for step in range(1, order + 1):
        reflection = -np.sum(filters[:, :step] * lags[:, step:0:-1], axis=1) / error
        filters[:, 1 : step + 1] += reflection[:, None] * filters[:, :step][:, ::-1]
        error = error * (1.0 - reflection * reflection)
    return filters, 10.0 * np.log10(whole / error)
