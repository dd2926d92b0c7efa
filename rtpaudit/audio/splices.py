"""Sound cut to the wrong packet time: joins that do not fit, at one place of every packet or frame."""

from dataclasses import dataclass

import numpy as np

from rtpaudit.audio.judged import FRAME, Judged, judged_frames
from rtpaudit.audio.scan import Mask, Samples

PERIODS_MS = (10, 20, 30, 40, 60)
"""packet and frame times in use (common practice)"""
LEAST_EACH = 15
"""samples at each place of the period before it is judged"""
LARGEST = 100.0
"""error of one sample that counts at most, in variances: no single click decides"""
EXCESS = 3.0
"""of the mean error at the joins over that elsewhere (common practice)"""
SIGMA = 7.0
"""of that excess by chance"""
UNIQUE = 1.7
"""by how much the error at the joins exceeds that at any other place"""
JOIN = 2
"""samples over which a join spreads"""


@dataclass(frozen=True, slots=True)
class Splices:
    """Joins in the sound that come at one place of every period."""

    period_ms: int
    offset_ms: float
    """place of the join in the period, counted from the first sample of the timeline"""
    excess_db: float
    """by how much prediction errs more at the joins than elsewhere"""
    at_packet_edges: bool
    """the joins lie where packets meet"""
    confidence_pct: float


def splices_of(
    samples: Samples,
    sampling_rate_hz: int,
    packet_samples: int,
    received: Mask | None = None,
    judged: Judged | None = None,
) -> Splices | None:
    """Joins that do not fit, at one place of every 10, 20, 30, 40 or 60 ms.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        The timeline, the first sample that of a packet.
    sampling_rate_hz : int
        [Hz]
    packet_samples : int
        Samples in a packet.
    received : bool array, shape (n,), optional
        Frames with samples that were not received are passed over.
    judged : Judged, optional
        ``judged_frames`` of these samples, where it is known already.

    Returns
    -------
    Splices or None
        None where the sound goes on from packet to packet as it does within them.

    Notes
    -----
    A method of our own. A sender or gateway that cuts sound into pieces of one length and sends them as pieces of
    another leaves out, or repeats, the rest at every join. There linear prediction fails, always at the same place,
    while pulses of voice fall anywhere.
    """
    judged = judged_frames(samples, received) if judged is None else judged
    squares = np.minimum(judged.squares[:, :FRAME] / judged.variance[:, None], LARGEST)
    places = judged.starts[:, None] + np.arange(FRAME)
    found: list[Splices] = []
    for milliseconds in PERIODS_MS:
        period = milliseconds * sampling_rate_hz // 1000
        if len(places) * FRAME < LEAST_EACH * period:
            continue
        phase = (places % period).ravel()
        counts = np.maximum(np.bincount(phase, minlength=period), 1)
        mean = np.bincount(phase, squares.ravel(), period) / counts
        peak = int(mean.argmax())
        others = np.delete(mean, np.arange(peak - JOIN, peak + JOIN + 1) % period)
        spread = max(float(np.std(others)), 1e-3)
        ordinary = float(np.mean(others))
        least = max(EXCESS * ordinary, ordinary + SIGMA * spread, UNIQUE * float(others.max()))
        if mean[peak] < least:
            continue
        edge = bool(min(peak % packet_samples, -peak % packet_samples) <= JOIN) and period % packet_samples == 0
        excess = 10.0 * float(np.log10(mean[peak] / ordinary))
        found.append(
            Splices(milliseconds, peak / sampling_rate_hz * 1000.0, excess, edge, min(99.0, 60.0 + 2.0 * excess))
        )
    return max(found, key=lambda one: one.excess_db, default=None)
