"""Packet loss concealment of ITU-T G.711 Appendix I (09/1999), for 8000 samples a second.

A lost stretch is filled with the last pitch period before it, from 10 ms on with the last two, from 20 ms on with the
last three; it fades by 20 % of full gain in each 10 ms after the first and is silent after 60 ms. Where one signal goes
over into another both are overlapped and added: over a quarter of the pitch period at the beginning and between one,
two and three periods, at the end over that and 4 ms more for each further 10 ms lost, up to 10 ms.

The overlap at the beginning reaches back up to 30 samples before the loss, so a receiver has to hold its output back by
those 3.75 ms. Here they are taken out again: input and output lie over each other.

The arithmetic is single precision and truncates to samples, as the reference program of ITU-T G.191 does.
"""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.kernels import kernel

Samples = NDArray[np.int16]
Positions = NDArray[np.int64]
Reals = NDArray[np.float32]

FRAME = 80
PITCH_MIN = 40
PITCH_MAX = 120
QUARTER_MAX = PITCH_MAX // 4
"""longest overlap at the beginning, and so the delay of a receiver; 3.75 ms"""
HISTORY = 3 * PITCH_MAX + QUARTER_MAX
"""samples before the loss that may be needed; 48.75 ms"""
WINDOW = 160
"""samples that are compared with those one pitch period earlier; 20 ms"""
DECIMATION = 2
"""of the first, coarse search for the pitch"""
LEAST_ENERGY = np.float32(250.0)
"""of the earlier samples in the window, so that silence has a correlation too"""
ATTENUATION = np.float32(0.2)
END_OVERLAP = 32
"""samples by which the overlap at the end grows with each further frame lost; 4 ms"""
PERIODS = 3
AUDIBLE_FRAMES = 6
"""frames until silence; 60 ms"""
ONE = np.float32(1.0)
LOUDEST, FAINTEST = np.float32(32767.0), np.float32(-32768.0)


def conceal(samples: Samples, lost: NDArray[np.bool_]) -> Samples:
    """A signal with its lost frames concealed.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        8000 samples a second; what stands in lost frames is not looked at.
    lost : bool array, shape (frames,)
        One element for each 10 ms (80 samples); missing elements are taken as received.

    Returns
    -------
    int16 array, shape (n,)
        Aligned with the input.

    References
    ----------
    ITU-T G.711 Appendix I (09/1999).
    """
    edges = np.flatnonzero(np.diff(lost.astype(np.int8), prepend=0, append=0)) * FRAME
    return conceal_runs(samples, edges[::2], edges[1::2])


def conceal_runs(samples: Samples, begin: Positions, end: Positions, in_place: bool = False) -> Samples:
    """``conceal`` where losses begin and end at any sample.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        As for ``conceal``.
    begin, end : int64 array, shape (runs,)
        Lost are the samples ``begin[i]`` to ``end[i] - 1``. Ascending, and with at least a sample received between two
        runs. [samples]
    in_place : bool
        Whether ``samples`` itself is written to: a call of hours has no room for two.

    Returns
    -------
    int16 array, shape (n,)

    Notes
    -----
    Frames of 10 ms are counted from the beginning of each run. The last one may be shorter, and so may be the overlap
    at the end where the next run follows in less than 10 ms.
    """
    heard = samples if in_place else samples.copy()
    begin, end = np.clip(begin, 0, len(samples)), np.clip(end, 0, len(samples))
    history, quarter, frame, tail = (np.empty(size, np.float32) for size in (HISTORY, QUARTER_MAX, FRAME, FRAME))
    _conceal_runs(heard, begin, end, history, quarter, frame, tail)
    return heard


@kernel
def _conceal_runs(
    heard: Samples, begin: Positions, end: Positions, history: Reals, last_quarter: Reals, frame: Reals, tail: Reals
) -> None:
    """Runs in place: what is heard so far is the history of the next run. The last four arguments are scratch."""
    for run in range(len(begin)):
        received_until = begin[run + 1] if run + 1 < len(begin) else len(heard)
        if begin[run] < end[run]:
            _conceal_run(heard, begin[run], end[run], received_until, history, last_quarter, frame, tail)


@kernel
def _conceal_run(
    heard: Samples,
    begin: int,
    end: int,
    received_until: int,
    history: Reals,
    last_quarter: Reals,
    frame: Reals,
    tail: Reals,
) -> None:
    for i in range(HISTORY):
        history[i] = heard[begin - HISTORY + i] if begin - HISTORY + i >= 0 else 0
    pitch = _pitch(history)
    quarter = pitch // 4
    for i in range(quarter):
        last_quarter[i] = history[HISTORY - quarter + i]

    periods, offset = 1, 0
    _close_cycle(history, last_quarter, quarter, pitch)
    for i in range(min(quarter, begin)):
        heard[begin - 1 - i] = np.int16(history[HISTORY - 1 - i])

    frames = (end - begin + FRAME - 1) // FRAME
    for k in range(frames):
        count = min(FRAME, end - begin - k * FRAME)
        if 0 < k < PERIODS:
            _read(history, periods * pitch, offset, tail, quarter)
            while offset > pitch:
                offset -= pitch
            periods += 1
            _close_cycle(history, last_quarter, quarter, periods * pitch)
        offset = _read(history, periods * pitch, offset, frame, count)
        if 0 < k < PERIODS:
            _cross_fade(tail, frame, frame, quarter, ONE)
        if k > 0:
            _fade(frame, k)
        for i in range(count):
            heard[begin + k * FRAME + i] = np.int16(frame[i])

    overlap = min(quarter + (frames - 1) * END_OVERLAP, FRAME, received_until - end)
    if overlap > 0:
        _read(history, periods * pitch, offset, tail, overlap)
        gain = max(ONE - np.float32(frames - 1) * ATTENUATION, np.float32(0.0))
        for i in range(overlap):
            frame[i] = heard[end + i]
        _cross_fade(tail, frame, frame, overlap, gain)
        for i in range(overlap):
            heard[end + i] = np.int16(frame[i])


@kernel
def _pitch(history: Reals) -> int:
    """Pitch period at the end of the history: every second sample and lag first, then all around the best."""
    first, last = 0, PITCH_MAX - PITCH_MIN
    best = first
    for step in (DECIMATION, 1):
        best = _best_shift(history, first, last, step)
        first, last = max(best - step + 1, first), min(best + step - 1, last)
    return PITCH_MAX - best


@kernel
def _best_shift(history: Reals, first: int, last: int, step: int) -> int:
    """Shift, from the longest lag on, at which the normalised correlation with the last 20 ms is greatest.

    Of equal ones the coarse search takes the last, the fine search the first.
    """
    newest, oldest = HISTORY - WINDOW, HISTORY - WINDOW - PITCH_MAX
    best, best_shift = np.float32(0.0), -1
    energy = np.float32(0.0)
    for i in range(0, WINDOW, step):
        energy += history[oldest + first + i] * history[oldest + first + i]
    for shift in range(first, last + 1, step):
        at = oldest + shift
        if shift > first:
            energy -= history[at - step] * history[at - step]
            energy += history[at - step + WINDOW] * history[at - step + WINDOW]
        match = np.float32(0.0)
        for i in range(0, WINDOW, step):
            match += history[at + i] * history[newest + i]
        match /= np.sqrt(max(energy, LEAST_ENERGY))
        if best_shift < 0 or match > best or (match == best and step > 1):
            best, best_shift = match, shift
    return best_shift


@kernel
def _close_cycle(history: Reals, last_quarter: Reals, quarter: int, length: int) -> None:
    """Let the end of the last ``length`` samples go over into what stands before them, so that they can be repeated."""
    before = history[HISTORY - length - quarter : HISTORY - length]
    _cross_fade(last_quarter, before, history[HISTORY - quarter :], quarter, ONE)


@kernel
def _read(history: Reals, length: int, offset: int, into: Reals, count: int) -> int:
    """Samples out of the repeated end of the history, truncated; returns where to go on."""
    for i in range(count):
        into[i] = np.float32(np.int16(history[HISTORY - length + offset]))
        offset = offset + 1 if offset + 1 < length else 0
    return offset


@kernel
def _cross_fade(left: Reals, right: Reals, into: Reals, count: int, gain: np.float32) -> None:
    """``left``, scaled by ``gain``, fades out linearly while ``right`` fades in."""
    step = ONE / np.float32(count)
    left_step = step * gain
    left_weight, right_weight = (ONE - step) * gain, step
    for i in range(count):
        mixed = left_weight * left[i] + right_weight * right[i]
        into[i] = min(max(mixed, FAINTEST), LOUDEST)
        left_weight -= left_step
        right_weight += step


@kernel
def _fade(frame: Reals, earlier_frames: int) -> None:
    """Gain falls linearly within the frame, by the attenuation of each 10 ms after the first, down to silence."""
    gain = ONE - np.float32(earlier_frames - 1) * ATTENUATION
    step = ATTENUATION / np.float32(FRAME)
    for i in range(FRAME):
        frame[i] = np.float32(np.int16(np.float32(np.int16(frame[i])) * gain)) if earlier_frames < AUDIBLE_FRAMES else 0
        gain -= step
