"""Beginnings of talkspurts: whether speech rises from silence, or is in full swing with its first sample."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import SpeechLevel, dbov
from rtpaudit.audio.scan import Samples
from rtpaudit.units import percent

FIRST_S = 0.005
"""of a talkspurt: before any syllable can have risen (common practice)"""
BODY_S = 0.25
BELOW_DB = 14.0
"""below the active level: speech in full swing lies above it nearly all the time (common practice)"""
FEWEST = 4
LEAST_DBOV = -42.0
"""softer speech has its soft beginnings below the steps of the code (common practice)"""


@dataclass(frozen=True, slots=True)
class Onsets:
    """How talkspurts begin."""

    talkspurts: int
    """with speech in their first quarter of a second"""
    cut: int
    """that begin in full swing"""

    @property
    def cut_pct(self) -> float:
        """Share that begins in full swing; NaN without talkspurts. [%]"""
        return percent(self.cut, self.talkspurts)


def onsets_of(samples: Samples, sampling_rate_hz: int, begins: NDArray[np.int64], level: SpeechLevel) -> Onsets | None:
    """How the talkspurts of one stream begin.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        A stream's timeline.
    sampling_rate_hz : int
        [Hz]
    begins : int64 array, shape (talkspurts,)
        First sample of each talkspurt that follows a pause in which nothing was sent. [samples]
    level : SpeechLevel
        Of the stream.

    Returns
    -------
    Onsets or None
        None below four talkspurts, and without speech or where it is too soft.

    Notes
    -----
    Common practice: a detector of speech that opens in time lets through what comes before the syllable as well, so
    that the first 5 ms are soft.
    """
    first, body = round(FIRST_S * sampling_rate_hz), round(BODY_S * sampling_rate_hz)
    begins = begins[begins + body <= len(samples)]
    if len(begins) < FEWEST or not level.active_dbov >= LEAST_DBOV:
        return None
    pieces = samples[begins[:, None] + np.arange(body)].astype(np.float64)
    limit = level.active_dbov - BELOW_DB
    speaks = dbov(np.mean(pieces * pieces, axis=1)) >= limit
    starts = dbov(np.mean(pieces[:, :first] ** 2, axis=1)) >= limit
    if speaks.sum() < FEWEST:
        return None
    return Onsets(int(speaks.sum()), int((speaks & starts).sum()))
