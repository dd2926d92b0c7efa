"""Frames of a stream in which a sample tells the next, with the errors that linear prediction makes in them.

Lengths and limits are our own, chosen on recorded and synthetic voices.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import FULL_SCALE
from rtpaudit.audio.prediction import predictors
from rtpaudit.audio.scan import Mask, Samples

Matrix = NDArray[np.float64]

ORDER = 16
FRAME, CONTEXT = 160, 400
"""samples that are judged together, and that their predictor is made from"""
FRAMES = 3000
"""frames that are judged at most, spread over the stream"""
LEAST_DBOV = -45.0
LEAST_GAIN_DB = 4.0
"""prediction gain of a frame below which it tells nothing"""


@dataclass(frozen=True, slots=True)
class Judged:
    """Frames spread over a stream."""

    starts: NDArray[np.int64]
    """first sample of each frame. Shape (n,)"""
    x: Matrix
    """samples from ``ORDER`` before the frame to ``ORDER`` after it. Shape (n, FRAME + 2 ORDER)"""
    filters: Matrix
    """prediction error filters. Shape (n, ORDER + 1)"""
    gain_db: Matrix
    """prediction gain. Shape (n,)"""
    squares: Matrix
    """squares of the errors from the frame's first sample on. Shape (n, FRAME + ORDER)"""
    variance: Matrix
    """of the ordinary errors: those of clicks and pulses of voice do not move it. Shape (n,)"""

    def where(self, chosen: Mask) -> "Judged":
        """Some of the frames. Shape of ``chosen``: (n,)."""
        return Judged(
            self.starts[chosen],
            self.x[chosen],
            self.filters[chosen],
            self.gain_db[chosen],
            self.squares[chosen],
            self.variance[chosen],
        )


def judged_frames(samples: Samples, received: Mask | None = None) -> Judged:
    """Frames with sound that is predictable, spread over a stream.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    received : bool array, shape (n,), optional
        Frames with samples that were not received, in them or beside them, are passed over.

    Returns
    -------
    Judged
        At most ``FRAMES`` of them.
    """
    starts = np.arange(CONTEXT, len(samples) - CONTEXT, FRAME)
    if len(starts) > 4 * FRAMES:
        starts = starts[np.linspace(0, len(starts) - 1, 4 * FRAMES).astype(np.int64)]
    spread = np.arange(CONTEXT) - (CONTEXT - FRAME) // 2
    if received is not None:
        starts = starts[received[starts[:, None] + spread].all(axis=1)]
    power = np.var(samples[starts[:, None] + np.arange(FRAME)].astype(np.float32), axis=1)
    starts = starts[power > FULL_SCALE**2 * 10.0 ** (LEAST_DBOV / 10.0)]
    if len(starts) > FRAMES:
        starts = starts[np.linspace(0, len(starts) - 1, FRAMES).astype(np.int64)]
    filters, gain = predictors(samples[starts[:, None] + spread].astype(np.float64), ORDER)
    told = gain > LEAST_GAIN_DB
    starts, filters, gain = starts[told], filters[told], gain[told]
    x = samples[starts[:, None] + np.arange(-ORDER, FRAME + ORDER)].astype(np.float64)
    squares = errors_of(x, filters) ** 2
    # The median of the squares of Gaussian noise is 0.455 of its variance.
    variance = np.median(squares[:, :FRAME], axis=1) / 0.455 + 1.0
    return Judged(starts, x, filters, gain, squares, variance)


def errors_of(x: Matrix, filters: Matrix) -> Matrix:
    """Prediction errors of rows, each by its own filter, from the first sample on that has ``ORDER`` before it."""
    count = x.shape[1] - ORDER
    errors = np.zeros((len(x), count))
    for back in range(ORDER + 1):
        errors += filters[:, back : back + 1] * x[:, ORDER - back : ORDER - back + count]
    return errors
