"""Frames of samples that come twice in a row, as a buffer between two clocks repeats them."""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.scan import Mask, Samples

Places = NDArray[np.int64]

FRAMES_MS = (2, 5, 10, 20, 30)
"""lengths that buffers have (common practice)"""
LEAST_MAGNITUDE = 100
"""softer samples match by chance"""
LEAST_VALUES = 10
"""different values in a frame: a slow wave in coarse steps matches itself"""
BESIDE, ABRUPT = 16, 0.25
"""samples on either side of the frame, and by which share of their size they have to differ"""
CHANCE_MATCH = 8
"""samples beside the frame that may match by chance"""
CANDIDATES = 2000


def repeated_frames(samples: Samples, sampling_rate_hz: int, received: Mask | None = None) -> Places:
    """First sample of each frame that repeats the samples before it.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    sampling_rate_hz : int
        [Hz]
    received : bool array, shape (n,), optional
        What was not received repeats nothing.

    Returns
    -------
    int64 array, shape (frames,)
        Frames of 2, 5, 10, 20 and 30 ms that match the samples before them exactly, while the samples beside them do
        not go on matching as those of a tone would.
    """
    found: list[int] = []
    for milliseconds in FRAMES_MS:
        lag = milliseconds * sampling_rate_hz // 1000
        for place in _candidates(samples, lag):
            first, last = _match(samples, place, lag)
            known = received is None or bool(received[first - lag : last].all())
            if known and lag <= last - first < lag + CHANCE_MATCH and _is_abrupt(samples, first, last, lag):
                found.append(first)
    return np.unique(np.array(found, np.int64))


def _candidates(samples: Samples, lag: int) -> list[int]:
    """Places, one in each half frame, where four samples match those a frame before."""
    stride = lag // 2
    count = max(0, (len(samples) - lag - 4) // stride)
    if count == 0:
        return []
    now = samples[lag:][: count * stride : stride]
    match = (now == samples[: count * stride : stride]) & (np.abs(now) > LEAST_MAGNITUDE)
    places = np.flatnonzero(match) * stride + lag
    for step in (1, 2, 3):
        places = places[samples[places + step] == samples[places + step - lag]]
    if len(places) > CANDIDATES:
        places = places[np.linspace(0, len(places) - 1, CANDIDATES).astype(np.int64)]
    return [int(place) for place in places]


def _match(samples: Samples, place: int, lag: int) -> tuple[int, int]:
    """First and one after the last of the samples around a place that match those a frame before, up to two frames."""
    low, high = max(lag, place - 2 * lag), min(len(samples), place + 2 * lag)
    equal = samples[low:high] == samples[low - lag : high - lag]
    differ = np.flatnonzero(~equal)
    before, after = differ[differ < place - low], differ[differ > place - low]
    first = low + (int(before[-1]) + 1 if len(before) else 0)
    return first, low + int(after[0]) if len(after) else high


def _is_abrupt(samples: Samples, first: int, last: int, lag: int) -> bool:
    """Whether the samples beside a match differ by more than a step of the code, as those of a tone or vowel do not."""
    if len(np.unique(samples[first:last])) < LEAST_VALUES:
        return False
    beside = [slice(max(lag, first - BESIDE), first), slice(last, last + BESIDE)]
    now = np.concatenate([samples[one] for one in beside]).astype(np.int64)
    before = np.concatenate([samples[one.start - lag : one.stop - lag] for one in beside]).astype(np.int64)
    before = before[: len(now)]
    return bool(np.abs(now - before).sum() > ABRUPT * np.abs(now).sum())
