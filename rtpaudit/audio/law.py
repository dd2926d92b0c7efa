"""Wrong law: A-law octets that were decoded as mu-law, or the reverse, told from the sound alone."""

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from rtpaudit.audio.coding import reread
from rtpaudit.audio.level import FULL_SCALE
from rtpaudit.audio.prediction import predictors
from rtpaudit.audio.scan import Samples

FRAME_S = 0.032
CANDIDATES, FRAMES = 3000, 400
"""frames that are looked at for sound, and predicted, at most; spread over the stream"""
LEAST_FRAMES = 30
"""one second of sound"""
LEAST_DBOV = -65.0
ORDER = 8
ADVANTAGE_DB = 0.7
"""by which the fitting reading has to predict better on average; of white noise all readings predict alike"""
AGREEMENT = 0.7
"""share of frames in which it predicts better"""


class Law(StrEnum):
    """What the sound says about the law that it was decoded by."""

    RIGHT = "right"
    PCMA_AS_PCMU = "A-law decoded as mu-law"
    PCMU_AS_PCMA = "mu-law decoded as A-law"
    UNDECIDED = "undecided"


READINGS = {Law.PCMA_AS_PCMU: ("PCMU", "PCMA"), Law.PCMU_AS_PCMA: ("PCMA", "PCMU")}
"""law by which the samples were decoded, and by which they should have been"""


@dataclass(frozen=True, slots=True)
class LawVerdict:
    """Which law the sound fits."""

    law: Law
    advantage_db: float
    """by how much the fitting reading predicts better than the one that fits next best; NaN without sound"""
    frames: int
    confidence_pct: float


def law_of(samples: Samples, sampling_rate_hz: int) -> LawVerdict:
    """Whether samples were decoded by the right law.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        As decoded by the law that signalling or payload type named. The fault may also lie further up: samples decoded
        wrongly there and coded anew, by whatever codec that keeps the waveform.
    sampling_rate_hz : int
        [Hz]

    Returns
    -------
    LawVerdict
        Undecided for silence, steady noise, encrypted payloads, and where there is less than a second of sound.

    Notes
    -----
    A method of our own. The laws give the same octet to samples of quite different size, so the wrong one tears the
    waveform: each sample then tells less of the next. The samples are read both ways and as they are; the reading with
    the largest prediction gain, in most frames, is the right one. Speech, music, tones and modems are all predictable,
    in the right law; white noise is not in any.
    """
    readings = _readings(samples, round(FRAME_S * sampling_rate_hz))
    frames = len(readings[Law.RIGHT])
    if frames < LEAST_FRAMES:
        return LawVerdict(Law.UNDECIDED, float("nan"), frames, 0.0)
    gains = {law: predictors(heard.astype(np.float64), ORDER)[1] for law, heard in readings.items()}
    first, second, *_ = sorted(gains, key=lambda law: float(np.mean(gains[law])), reverse=True)
    advantage = float(np.mean(gains[first] - gains[second]))
    agreement = float(np.mean(gains[first] > gains[second]))
    if advantage < ADVANTAGE_DB or agreement < AGREEMENT:
        return LawVerdict(Law.UNDECIDED, advantage, frames, 0.0)
    sure = min(1.0, agreement + 0.1) * min(1.0, 0.75 + advantage / 16.0) * min(1.0, 0.85 + frames / 1000.0)
    return LawVerdict(first, advantage, frames, 99.0 * sure)


def by_right_law(samples: Samples, law: Law) -> Samples:
    """The samples as the right law reads them; those of a right or undecided verdict as they are. Any shape."""
    return reread(samples, *READINGS[law]) if law in READINGS else samples


def _readings(samples: Samples, length: int) -> dict[Law, Samples]:
    """Frames spread over the stream in each reading, those that have sound in all of them. Shape (frames, length)."""
    count = len(samples) // length
    places = np.unique(np.linspace(0, max(0, count - 1), min(count, CANDIDATES)).astype(np.int64))
    frames = np.ascontiguousarray(samples[: count * length].reshape(count, length)[places])
    readings = {Law.RIGHT: frames} | {fault: reread(frames, *laws) for fault, laws in READINGS.items()}
    # The wrong law makes noise of silence: only where all readings have sound do they compare.
    power = np.min([np.var(heard.astype(np.float32), axis=1) for heard in readings.values()], axis=0)
    sounding = np.flatnonzero(power > FULL_SCALE**2 * 10.0 ** (LEAST_DBOV / 10.0))
    if len(sounding) > FRAMES:
        sounding = sounding[np.linspace(0, len(sounding) - 1, FRAMES).astype(np.int64)]
    return {law: heard[sounding] for law, heard in readings.items()}
