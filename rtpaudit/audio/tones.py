"""Tones in the sound: where it is steady, which one or two frequencies make it up, and how pure a test tone is."""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import islice

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import FULL_SCALE, dbm0, dbov
from rtpaudit.audio.scan import BLOCKS_PER_S, Mask, Samples, Scan

LEAST_DBOV = -50.0
"""softer tones are not looked for (common practice)"""
CREST = 5.0
"""square of peak over root mean square: 2 for one sine, 4 for two; speech is far above (common practice)"""
STEADY_RATIO = 1.41
"""1.5 dB between one twentieth of a second and the next (common practice)"""
PIECE = 5
"""blocks over which the beat of two tones 40 Hz apart evens out"""
FRAME, HOP = 20, 10
"""blocks under one spectrum: 200 ms tell 440 from 480 Hz; and from one to the next"""
FRAMES = 300
"""spectra at most for one steady passage"""
PASSAGES = 1000
"""steady passages of one stream that are looked at"""
LINES = 2
LINE_RANGE = 10.0**1.2
"""by which the stronger of two tones may exceed the other"""
PURITY = 0.85
"""share of the power that the lines have to hold (common practice)"""
MAIN_LOBE = 2
"""half width of the line of a Hann window. [bins]"""
PADDING = 4
LEAST_HZ = 200.0
"""below it there are voices and hum, but no signalling tones"""
CLOSE_HZ = 25.0
"""lines closer than this are one that is modulated, such as an answer tone with phase reversals"""
FIT_S = 1.0
FITS = 10


@dataclass(frozen=True, slots=True)
class ToneBurst:
    """A passage of one or two steady frequencies."""

    from_s: float
    to_s: float
    frequencies_hz: tuple[float, ...]
    """the lower first"""
    level_dbov: float

    @property
    def duration_s(self) -> float:
        """Length of the burst, to 10 ms. [s]"""
        return self.to_s - self.from_s


@dataclass(frozen=True, slots=True)
class SteadyTone:
    """A single steady frequency, as a test set sends it."""

    from_s: float
    to_s: float
    frequency_hz: float
    level_dbov: float
    level_dbm0: float
    """NaN for an encoding without an agreed overload point"""
    signal_to_distortion_db: float
    """tone against everything else but the offset, over the whole band"""
    confidence_pct: float


def tone_bursts(samples: Samples, scanned: Scan) -> list[ToneBurst]:
    """Passages of at least 100 ms in which one or two frequencies hold nearly all the power.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    scanned : Scan
        Of these samples.

    Returns
    -------
    list of ToneBurst
        In order of time; where the frequencies change without a pause one burst ends and the next begins.

    Notes
    -----
    Common practice. Passages are picked by their steady level and low crest; only these are looked at by spectrum.
    """
    found: list[ToneBurst] = []
    for first, last in islice(_steady_passages(scanned), PASSAGES):
        found += _bursts_of(samples, scanned, first, last)
    return [one for k, one in enumerate(found) if not _is_a_change(found, k)]


def steady_tones(samples: Samples, scanned: Scan, bursts: list[ToneBurst], encoding: str = "") -> list[SteadyTone]:
    """Single tones of one second or more, measured as a test set would.

    Parameters
    ----------
    samples : int16 array, shape (n,)
    scanned : Scan
        Of these samples.
    bursts : list of ToneBurst
        As from ``tone_bursts``.
    encoding : str
        IANA media subtype, for the level in dBm0.

    Returns
    -------
    list of SteadyTone

    References
    ----------
    Least-squares sine fit of IEEE Std 1057 (from memory); the usual test tones are 1004 Hz (North America) and 1020 Hz
    (ITU-T O.6, from memory), off the submultiples of the sampling rate.
    """
    measured = []
    for burst in bursts:
        if len(burst.frequencies_hz) == 1 and burst.duration_s >= FIT_S:
            measured.append(_measure(samples, scanned.sampling_rate_hz, burst, encoding))
    return [one for one in measured if one is not None]


def _steady_passages(scanned: Scan) -> Iterator[tuple[int, int]]:
    """First block of each steady passage, and the one after its last."""
    power = np.nan_to_num(scanned.power())
    if len(power) < 2 * PIECE:
        return
    sums = np.concatenate([[0.0], np.cumsum(power)])
    mean = np.maximum((sums[PIECE:] - sums[:-PIECE]) / PIECE, 1e-9)
    peak = np.maximum(scanned.peak - abs(scanned.dc_offset), 0.0)
    top = peak[PIECE - 1 :].copy()
    for shift in range(PIECE - 1):
        np.maximum(top, peak[shift : shift + len(top)], out=top)
    least = FULL_SCALE**2 * 10.0 ** (LEAST_DBOV / 10.0)
    calm = (mean > least) & (top * top <= CREST * mean)
    ratio = mean[PIECE:] / mean[:-PIECE]
    pair = calm[:-PIECE] & calm[PIECE:] & (ratio < STEADY_RATIO) & (ratio > 1.0 / STEADY_RATIO)
    marks = np.zeros(len(power) + 1, np.int64)
    np.add.at(marks, np.flatnonzero(pair), 1)
    np.add.at(marks, np.flatnonzero(pair) + 2 * PIECE, -1)
    edges = np.flatnonzero(np.diff(np.concatenate([[0], marks.cumsum() > 0, [0]])))
    yield from zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True)


def _bursts_of(samples: Samples, scanned: Scan, first: int, last: int) -> list[ToneBurst]:
    """Bursts in one steady passage, split where the frequencies change."""
    block = scanned.block_samples
    last = min(last, len(samples) // block)
    length = FRAME if last - first >= FRAME else HOP
    if last - first < length:
        return []
    starts = np.unique(np.append(np.arange(first, last - length, HOP), last - length))
    if len(starts) > FRAMES:
        starts = starts[np.linspace(0, len(starts) - 1, FRAMES).astype(np.int64)]
    reach = max(FRAME, int(np.diff(starts).max(initial=0)))
    frames = samples[(starts * block)[:, None] + np.arange(length * block)]
    frequency, power, pure = _lines(frames, scanned.sampling_rate_hz)
    found: list[tuple[int, int, tuple[float, ...], list[float]]] = []
    for k, start in enumerate(starts.tolist()):
        if not pure[k]:
            continue
        heard = _frequencies(frequency[k], power[k])
        if heard[0] < LEAST_HZ:
            continue
        # A phase reversal spoils the spectra over it, no more than that.
        if found and start - found[-1][1] <= reach and _same(found[-1][2], heard):
            found[-1] = (found[-1][0], start + length, found[-1][2], [*found[-1][3], float(power[k].sum())])
        else:
            found.append((start, start + length, heard, [float(power[k].sum())]))
    seconds = block / scanned.sampling_rate_hz
    return [
        ToneBurst(start * seconds, end * seconds, heard, float(dbov(float(np.median(powers)))))
        for start, end, heard, powers in found
    ]


def _lines(frames: Samples, rate: int) -> tuple[NDArray[np.float64], NDArray[np.float64], Mask]:
    """Frequency [Hz] and power of the strongest lines, shape (frames, lines), and whether they hold all there is."""
    length = frames.shape[1]
    centred = frames - frames.mean(axis=1, keepdims=True)
    window = np.hanning(length + 1)[:-1]
    size = PADDING * length
    spectrum = np.abs(np.fft.rfft(centred * window, size, axis=1)) ** 2
    spectrum *= 2.0 / (PADDING * length * float(window @ window))
    total = spectrum.sum(axis=1)
    frequency, power = np.zeros((len(frames), LINES)), np.zeros((len(frames), LINES))
    rows, lobe = np.arange(len(frames)), np.arange(-MAIN_LOBE * PADDING, MAIN_LOBE * PADDING + 1)
    left = spectrum.copy()
    for line in range(LINES):
        peak = np.clip(left.argmax(axis=1), -lobe[0], spectrum.shape[1] - 1 - lobe[-1])
        around = peak[:, None] + lobe
        power[:, line] = left[rows[:, None], around].sum(axis=1)
        frequency[:, line] = (peak + _vertex(left, rows, peak)) * rate / size
        left[rows[:, None], around] = 0.0
    return frequency, power, np.asarray(power.sum(axis=1) >= PURITY * total)


def _vertex(spectrum: NDArray[np.float64], rows: NDArray[np.int64], peak: NDArray[np.int64]) -> NDArray[np.float64]:
    """Place of the maximum beside the highest bin, by a parabola through the logarithms of three. [bins]"""
    before, at, after = (np.log(spectrum[rows, peak + step] + 1e-12) for step in (-1, 0, 1))
    bend = before - 2.0 * at + after
    return np.where(bend < -1e-9, np.clip(0.5 * (before - after) / np.minimum(bend, -1e-9), -1.0, 1.0), 0.0)


def _frequencies(frequency: NDArray[np.float64], power: NDArray[np.float64]) -> tuple[float, ...]:
    """The frequencies that count: the second only where it is not faint, nor so close that it is the same line."""
    (one, other), (strong, weak) = frequency.tolist(), power.tolist()
    if weak * LINE_RANGE < strong or abs(one - other) < CLOSE_HZ:
        return (one,)
    return (min(one, other), max(one, other))


def _same(one: tuple[float, ...], other: tuple[float, ...]) -> bool:
    """Whether two sets of frequencies agree within 1 % and 4 Hz."""
    return len(one) == len(other) and all(abs(a - b) <= 4.0 + 0.01 * a for a, b in zip(one, other, strict=True))


def _is_a_change(bursts: list[ToneBurst], k: int) -> bool:
    """Whether a burst of two frequencies is but the moment in which one follows the other."""
    if not 0 < k < len(bursts) - 1 or len(bursts[k].frequencies_hz) != 2:
        return False
    before, after = bursts[k - 1].frequencies_hz, bursts[k + 1].frequencies_hz
    low, high = bursts[k].frequencies_hz
    return len(before) == len(after) == 1 and any(
        _same(before, (one,)) and _same(after, (other,)) for one, other in ((low, high), (high, low))
    )


def _measure(samples: Samples, rate: int, burst: ToneBurst, encoding: str) -> SteadyTone | None:
    """Fits of seconds spread over the burst, put together."""
    margin = 2.0 / BLOCKS_PER_S
    first, last = round((burst.from_s + margin) * rate), round((burst.to_s - margin) * rate)
    length = min(round(FIT_S * rate), last - first)
    count = min(FITS, max(1, (last - first) // length))
    fits = [
        _fit(samples[start : start + length].astype(np.float64), burst.frequencies_hz[0], rate)
        for start in np.linspace(first, last - length, count).astype(np.int64)
    ]
    frequency, tone, rest = (np.array(column) for column in zip(*fits, strict=True))
    ratio = 10.0 * float(np.log10(np.median(tone) / max(float(np.median(rest)), 1e-9)))
    level = float(dbov(float(np.median(tone))))
    if ratio < 3.0:
        return None
    return SteadyTone(
        burst.from_s,
        burst.to_s,
        float(np.median(frequency)),
        level,
        dbm0(level, encoding),
        ratio,
        min(99.0, 50.0 + 10.0 * burst.duration_s),
    )


def _fit(x: NDArray[np.float64], hz: float, rate: int) -> tuple[float, float, float]:
    """Frequency [Hz], mean square of the sine that fits best, and of what is left beside it and the offset."""
    time = np.arange(len(x)) / rate
    a = b = 0.0
    for _ in range(6):
        angle = 2.0 * np.pi * hz * time
        cos, sin = np.cos(angle), np.sin(angle)
        # The last column is the derivative by frequency: its coefficient is the correction.
        columns = np.stack([cos, sin, np.ones(len(x)), 2.0 * np.pi * time * (b * cos - a * sin)], axis=1)
        used = columns if a or b else columns[:, :3]
        solution = np.linalg.solve(used.T @ used + 1e-9 * np.eye(used.shape[1]), used.T @ x)
        a, b = float(solution[0]), float(solution[1])
        if len(solution) == 4:
            hz += float(np.clip(solution[3], -2.0, 2.0))
    left = x - used @ solution
    return hz, (a * a + b * b) / 2.0, float(np.mean(left * left))
