"""Talker echo: what one side said, heard again from the other side, later and softer."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import dbov
from rtpaudit.audio.scan import Samples

Vector = NDArray[np.float64]
Matrix = NDArray[np.float64]
Places = NDArray[np.int64]

SEGMENT_S = 1.024
STEP_S = 0.512
LONGEST_S = 1.0
"""of delay that is looked for"""
EARLIER_S = 0.1
"""looked at before the sound as well: what comes before it is no echo of it"""
BLOCK_S = 0.016
BLOCKS_AT_ONCE = 1 << 13
REGIONS, SEGMENTS = 5, 16
"""parts of the call that are judged each for itself, so that clocks that drift do not blur them; segments in each"""
LEAST_SEGMENTS = 4
SPOKEN_DBOV, SPOKEN_SHARE = -45.0, 0.3
"""level that blocks of speech pass, and their share of a segment in which the talker speaks (common practice)"""
PAUSE_DB, PAUSE_SHARE = 25.0, 0.06
"""below its loudest block, and share of such blocks: speech has gaps, music that is played both ways has none"""
SOFTER_DB = 3.0
"""by which the other side is softer in a segment: where it speaks itself nothing can be told"""
HEARD_DBOV = -78.0
"""softer than this the other side sends nothing"""
BAND_HZ = (250.0, 3400.0)
WHITENING = 0.8
SPREAD_S = 0.001
"""over which correlation is gathered: an echo path is no single reflection"""
SIGMA = 35.0
"""of the correlation at the delay above that at all others. About one part in a hundred passes it without any echo,
by as much as 195; with one they mostly have hundreds (measured on some twenty voices). So two parts have to agree.
"""
SHOWN = 0.4
"""share of the parts of the call in which the same delay has to stand out"""
RIVAL = 0.6
"""share of it that another delay may reach"""
NEAR_S = 0.016
LEAST_S = 0.001
"""what comes back at once is no echo: both ways carry the same sound"""
AGREE_S, DRIFT = 0.02, 200e-6
"""by which delays of different parts of the call may differ; and more so the longer they are apart"""
FIT_S = 0.064
LEAD_S = 0.006
"""of the window before the echo's delay, for the early part of the path"""
OWN_SPEECH = 10.0
"""by how much more than usual may come back of a piece before it is taken for the other side's own speech"""
PATH_S = 0.03
"""of that window in which the echo path lies, its early part included"""
LEAST_TRUST = 0.1
"""share of what was found that is echo at least, however much of it might be chance"""
SAME_SOURCE_DB = 3.0
"""nothing that loud is an echo: both ways carry the same sound"""
MOST_LOSS_DB = 55.0
"""softer echo is nothing to hear, and below the steps of G.711"""
ALIKE = 0.72
"""likeness of spectra an eighth of a second apart: 0.4 to 0.6 in speech, 0.9 and more in music (measured)"""
OWN_DB, OWN_SHARE = 10.0, 0.02
"""above the echo, and share of the time, from which on the other side speaks itself"""
LONE_PART = 0.7
SILENT_SIDE = 0.75
"""of the confidence where it never does: both ways may then carry one announcement"""
LEAST_LOSS_DB = 6.0
"""that echo cancellers are built for. ITU-T G.168, from memory"""


@dataclass(frozen=True, slots=True)
class Echo:
    """Echo of one side's speech in what it hears, as an estimate at the capture point."""

    delay_ms: float
    """from the talker's sound passing the capture point to its echo passing back"""
    loss_db: float
    """active speech over its echo"""
    segments: int
    """seconds of speech that were looked at"""
    shown_pct: float
    """share of the parts of the call in which the echo shows"""
    confidence_pct: float


def echo_of(spoken: Samples, heard: Samples, sampling_rate_hz: int) -> Echo | None:
    """Echo of ``spoken`` in ``heard``.

    Parameters
    ----------
    spoken : int16 array, shape (n,)
        What the talker sent.
    heard : int16 array, shape (m,)
        What was sent to the talker; its first sample passed the capture point together with that of ``spoken``.
    sampling_rate_hz : int
        Of both. [Hz]

    Returns
    -------
    Echo or None
        None where there is no echo, or no passage in which one side speaks and the other is softer.

    Notes
    -----
    Common practice. Seconds of speech are correlated with what comes back within ``LONGEST_S``, both whitened, and the
    squares added up over a part of the call; the echo is a delay that stands out from all others. Its loss is the part
    of the spectrum of ``heard`` that follows that of ``spoken`` at this delay; on made echoes it comes out about 1 dB
    too large, and up to 3 dB off. Speech over speech, music both ways and silence give none.
    """
    starts = _segments(spoken, heard, sampling_rate_hz)
    if len(starts) < LEAST_SEGMENTS:
        return None
    regions = _regions(starts)
    peaks = [_delay(spoken, heard, region, sampling_rate_hz) for region in regions]
    best = max(range(len(peaks)), key=lambda k: peaks[k][1])
    (delay, strength), region = peaks[best], regions[best]
    near = AGREE_S * sampling_rate_hz + DRIFT * np.array([abs(int(one[0] - region[0])) for one in regions])
    agree = np.array([peak[1] >= SIGMA and abs(peak[0] - delay) <= near[k] for k, peak in enumerate(peaks)])
    if strength < SIGMA or delay < LEAST_S * sampling_rate_hz:
        return None
    if agree.mean() < SHOWN or agree.sum() < min(2, len(regions)):
        return None
    loss = _loss_db(spoken, heard, region, int(delay), sampling_rate_hz)
    if not SAME_SOURCE_DB <= loss <= MOST_LOSS_DB or not _is_speech(spoken, region, sampling_rate_hz):
        return None
    # A call too short for two parts has nothing that confirms its echo.
    sure = 1.0 if len(regions) > 1 else LONE_PART
    sure *= min(1.0, 0.6 + 0.4 * (strength - SIGMA) / SIGMA) * min(1.0, 0.7 + 0.3 * len(starts) / SEGMENTS)
    sure *= 0.5 if loss < LEAST_LOSS_DB else 1.0
    sure *= 1.0 if _speaks_itself(spoken, heard, int(delay), loss, sampling_rate_hz) else SILENT_SIDE
    return Echo(1000.0 * delay / sampling_rate_hz, loss, len(starts), 100.0 * float(agree.mean()), 99.0 * sure)


def _regions(starts: Places) -> list[Places]:
    """Runs of segments that follow each other, one from the middle of each part of the call."""
    halves = 2 if len(starts) >= 2 * LEAST_SEGMENTS else 1
    parts = np.array_split(starts, max(halves, min(REGIONS, len(starts) // SEGMENTS)))
    first = [max(0, len(one) - SEGMENTS) // 2 for one in parts]
    return [one[k : k + SEGMENTS] for one, k in zip(parts, first, strict=True)]


def _segments(spoken: Samples, heard: Samples, rate: int) -> Places:
    """First samples of the segments in which the talker speaks, with gaps, and the other side is softer."""
    block = round(BLOCK_S * rate)
    length, step, reach = (round(one * rate) for one in (SEGMENT_S, STEP_S, SEGMENT_S + LONGEST_S))
    speech, answer = _levels(spoken, block), _levels(heard, block)
    count = min(len(speech), len(answer))
    long, far = length // block, reach // block
    if count < far:
        return np.empty(0, np.int64)
    here = np.arange(round(EARLIER_S * rate) // block + 1, count - far, step // block)
    blocks = np.lib.stride_tricks.sliding_window_view(speech, long)[here]
    loudest = np.percentile(blocks, 95, axis=1)
    talks = (blocks > SPOKEN_DBOV).mean(axis=1) >= SPOKEN_SHARE
    gaps = (blocks < loudest[:, None] - PAUSE_DB).mean(axis=1) >= PAUSE_SHARE
    back = np.lib.stride_tricks.sliding_window_view(answer, far)[here]
    returned = 10.0 * np.log10(np.mean(10.0 ** (back / 10.0), axis=1))
    sent = 10.0 * np.log10(np.mean(10.0 ** (blocks / 10.0), axis=1))
    good = talks & gaps & (returned < sent - SOFTER_DB) & (returned > HEARD_DBOV)
    return np.asarray(here[good] * block, np.int64)


def _levels(samples: Samples, block: int) -> Vector:
    """Level of each block about its mean. [dBov]"""
    whole = samples[: len(samples) // block * block].reshape(-1, block)
    # A call of hours at a time would take four times its own memory.
    runs = range(0, len(whole), BLOCKS_AT_ONCE)
    power = [np.var(whole[first : first + BLOCKS_AT_ONCE].astype(np.float32), axis=1) for first in runs]
    return dbov(np.concatenate([np.empty(0, np.float32), *power]).astype(np.float64))


def _delay(spoken: Samples, heard: Samples, starts: Places, rate: int) -> tuple[float, float]:
    """Delay that stands out [samples], and by how many standard deviations; 0 where another one rivals it."""
    length, early, late = (round(one * rate) for one in (SEGMENT_S, EARLIER_S, LONGEST_S))
    size = 1 << (length + early + late).bit_length()
    frequency = np.fft.rfftfreq(size, 1.0 / rate)
    band = (frequency >= BAND_HZ[0]) & (frequency <= BAND_HZ[1])
    gathered = np.zeros(early + late)
    window = np.hanning(length)
    for start in starts.tolist():
        x = np.fft.rfft(spoken[start : start + length] * window, size)
        y = np.fft.rfft(_flat(heard[start - early : start + length + late], round(BLOCK_S * rate)), size)
        cross = np.conj(x) * y * band
        cross /= (np.abs(x) * np.abs(y)) ** WHITENING + 1e-9
        correlation = np.fft.irfft(cross, size)[: early + late]
        gathered += correlation**2 / np.mean(correlation**2)
    width = max(1, round(SPREAD_S * rate))
    smooth = np.convolve(gathered / len(starts), np.ones(width) / width, mode="same")
    peak = int(smooth.argmax())
    near = round(NEAR_S * rate)
    others = np.concatenate([smooth[: max(0, peak - near)], smooth[peak + near :]])
    typical = float(np.median(others))
    deviation = 1.4826 * float(np.median(np.abs(others - typical)))
    strength = (float(smooth[peak]) - typical) / max(deviation, 1e-9)
    rivals = (float(others.max()) - typical) / max(deviation, 1e-9)
    return float(peak - early), strength if rivals < RIVAL * strength else 0.0


def _flat(samples: Samples, block: int) -> Vector:
    """Samples with passages that are louder than usual brought down: the other side's own speech sets in somewhere."""
    whole = samples.astype(np.float64)
    rows = whole[: len(whole) // block * block].reshape(-1, block)
    level = np.sqrt(np.mean(rows**2, axis=1)) + 1.0
    gain = np.minimum(1.0, np.median(level) / level)
    places = (np.arange(len(gain)) + 0.5) * block
    return np.asarray(whole * np.interp(np.arange(len(whole)), places, gain))


def _is_speech(spoken: Samples, starts: Places, rate: int) -> bool:
    """Whether spectra change within an eighth of a second, as those of speech do, and of notes and tones do not."""
    size, step = round(FIT_S * rate), round(2 * FIT_S * rate)
    firsts = (starts[:, None] + np.arange(0, round(SEGMENT_S * rate) - size - step, size)).ravel()
    window = np.hanning(size)
    now, later = (np.abs(np.fft.rfft(_pieces(spoken, one, size) * window, axis=1)) for one in (firsts, firsts + step))
    power, after = np.sum(now**2, axis=1), np.sum(later**2, axis=1)
    alike = np.sum(now * later, axis=1) / np.sqrt(power * after + 1e-9)
    loud = power > np.percentile(power, 95) * 10.0 ** (-PAUSE_DB / 10.0)
    return bool(np.median(alike[loud]) <= ALIKE)


def _speaks_itself(spoken: Samples, heard: Samples, delay: int, loss_db: float, rate: int) -> bool:
    """Whether the other side has sound of its own: much louder than the echo, somewhere."""
    block = round(BLOCK_S * rate)
    shift = delay // block
    speech, answer = _levels(spoken, block), _levels(heard, block)[shift:]
    count = min(len(speech), len(answer))
    around = np.maximum.reduce([np.roll(speech[:count], step) for step in (-1, 0, 1, 2)])
    own = (answer[:count] > around - loss_db + OWN_DB) & (answer[:count] > SPOKEN_DBOV)
    return bool(own.mean() >= OWN_SHARE)


def _loss_db(spoken: Samples, heard: Samples, starts: Places, delay: int, rate: int) -> float:
    """Power of the speech over that part of what came back that follows it. [dB]"""
    size = round(FIT_S * rate)
    lead = min(delay, round(LEAD_S * rate))
    inside = np.arange(0, round(SEGMENT_S * rate) - size, size // 2)
    firsts = starts[:, None] + inside
    firsts = firsts[firsts[:, -1] + delay - lead + size <= len(heard)]
    sent, back = (_pieces(one, at, size) for one, at in ((spoken, firsts), (heard, firsts + delay - lead)))
    power, returned = np.mean(sent**2, axis=2), np.mean(back**2, axis=2)
    # Where the other side speaks itself, much more comes back.
    speaks = power > np.percentile(power, 95) * 10.0 ** (-PAUSE_DB / 10.0)
    ratio = returned / np.maximum(power, 1e-9)
    window = np.hanning(size) * (speaks & (ratio <= OWN_SPEECH * np.median(ratio[speaks])))[:, :, None]
    x, y = np.fft.rfft(sent * window, axis=2), np.fft.rfft(back * window, axis=2)
    xx, xy = np.sum(np.abs(x) ** 2, axis=1), np.sum(np.conj(x) * y, axis=1)
    frequency = np.fft.rfftfreq(size, 1.0 / rate)
    band = (frequency >= BAND_HZ[0]) & (frequency <= BAND_HZ[1])
    # Paths in time, one of each segment as clocks may drift: the echo lies within the first part of the window, what
    # falls beside it is chance and tells how much chance falls inside.
    floor = 1e-3 * xx[:, band].mean(axis=1, keepdims=True)
    path = np.fft.irfft(np.where(band, xy / (xx + floor + 1e-9), 0.0), size, axis=1)
    within = np.arange(size) < round(PATH_S * rate)
    follows, chance = (
        float((xx * np.abs(np.fft.rfft(np.where(part, path, 0.0), axis=1)) ** 2)[:, band].sum())
        for part in (within, np.roll(within, size // 2))
    )
    return 10.0 * float(np.log10(xx[:, band].sum() / max(follows - chance, follows * LEAST_TRUST, 1e-9)))


def _pieces(samples: Samples, firsts: Places, size: int) -> Matrix:
    """Pieces of ``size`` samples about their means. Shape of ``firsts``, and ``size`` for the last axis."""
    pieces = samples[firsts[..., None] + np.arange(size)].astype(np.float64)
    return np.asarray(pieces - pieces.mean(axis=-1, keepdims=True))
