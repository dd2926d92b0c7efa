"""A stream's sound as a picture: its envelope in few steps, and the passages in which somebody speaks."""

import base64
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.level import THRESHOLDS_DB, level_of
from rtpaudit.audio.scan import BLOCKS_PER_S, scan

Samples = NDArray[np.int16]

FULL_SCALE = 32768.0
STEPS_OF_CODE = 127.0
SHORTEST_STEP_S = 0.002
"""finer than any screen shows of a whole call"""
MOST_PASSAGES = 1000
BRIDGED_S = 0.3
"""pauses between two words that make no new passage"""


@dataclass(frozen=True, slots=True)
class Waveform:
    """What the tape draws of a stream's sound."""

    envelope: bytes
    """least and greatest value of each step in turn, as signed octets: 127 times the root of the share of full scale"""
    step_s: float
    duration_s: float
    passages: list[tuple[float, float]]
    """begin and end of each passage of speech [s]"""

    def as_plain(self) -> dict[str, object]:
        """Plain values for the page."""
        return {
            "envelope": base64.b64encode(self.envelope).decode("ascii"),
            "step_s": self.step_s,
            "duration_s": round(self.duration_s, 4),
            "speech": [[round(begin, 2), round(end, 2)] for begin, end in self.passages],
        }


class Waveforms:
    """Pictures of the streams whose sound went by, or is made for it."""

    def __init__(self, heard: Callable[[str], tuple[Samples, int]], steps: int) -> None:
        self._heard = heard
        self._steps = steps
        self._made: dict[str, Waveform] = {}

    def take(self, stream_id: str, samples: Samples, rate_hz: int) -> None:
        """Draw a stream from its sound as heard, while it is at hand."""
        self._made[stream_id] = waveform(samples, rate_hz, self._steps)

    def of(self, stream_id: str) -> Waveform:
        """The picture of a stream that has sound."""
        if stream_id not in self._made:
            self.take(stream_id, *self._heard(stream_id))
        return self._made[stream_id]


def waveform(samples: Samples, rate_hz: int, steps: int) -> Waveform:
    """Picture of a timeline in at most so many steps."""
    step = max(1, round(rate_hz * SHORTEST_STEP_S), -(-len(samples) // steps))
    starts = np.arange(0, len(samples), step)
    extremes = np.zeros((len(starts), 2), np.int16)
    if len(starts):
        extremes[:, 0] = np.minimum.reduceat(samples, starts)
        extremes[:, 1] = np.maximum.reduceat(samples, starts)
    # The root gives soft sounds the steps that loud ones can do without.
    share = extremes / FULL_SCALE
    coded = np.rint(np.sign(share) * np.sqrt(np.abs(share)) * STEPS_OF_CODE).astype(np.int8)
    return Waveform(coded.tobytes(), step / rate_hz, len(samples) / rate_hz, speech_passages(samples, rate_hz))


def speech_passages(samples: Samples, rate_hz: int) -> list[tuple[float, float]]:
    """Begin and end of each passage of speech, by the threshold and hangover of P.56 method B. [s]"""
    if rate_hz < 1000 or not len(samples):
        return []
    scanned = scan(samples, rate_hz)
    threshold = level_of(scanned).threshold_dbov
    if np.isnan(threshold):
        return []
    active = scanned.reached >= np.searchsorted(THRESHOLDS_DB, threshold + 1e-9)
    edges = np.flatnonzero(np.diff(active.astype(np.int8), prepend=0, append=0))
    begin, end = edges[::2], edges[1::2]
    apart = np.concatenate([[True], begin[1:] - end[:-1] > BRIDGED_S * BLOCKS_PER_S])
    begin, end = begin[apart], np.concatenate([end[:-1][apart[1:]], end[-1:]])
    longest = np.sort(np.argsort(begin - end, kind="stable")[:MOST_PASSAGES])
    return list(zip((begin[longest] / BLOCKS_PER_S).tolist(), (end[longest] / BLOCKS_PER_S).tolist(), strict=True))
