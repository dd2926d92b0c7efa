"""Clock slips: single samples, or whole frames of them, repeated or dropped where two clocks meet between gateways."""

from dataclasses import dataclass
from math import comb, exp, factorial

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.judged import FRAME, ORDER, Judged, errors_of, judged_frames
from rtpaudit.audio.repeated_frames import repeated_frames
from rtpaudit.audio.scan import Mask, Samples

Places = NDArray[np.int64]

SLIP_S = 125e-6
"""one frame of T1 or E1, which holds one sample of each channel. RFC 4197, 2"""
SECONDS_A_DAY = 86_400.0

STEADY_GAIN_DB, STEADY_RATIO = 15.0, 1.26
"""of a frame, and of its halves: only in a tone can a missing sample be told from a pulse of voice or an onset"""
SHARP = 4.0
"""error of one sample from which on it may be the place of a drop, in standard deviations of the frame"""
REPEAT_GAIN, DROP_GAIN = 16.0, 30.0
"""by how much the error falls when the slip is undone, in variances of the frame"""
ORDINARY = 3.0
"""error a sample that may be left then, in variances: what is healed is ordinary sound"""
CHANCE_PER_S = (0.015, 0.015)
"""repeats and drops found in a second of sound without any (measured on recorded and synthetic voices)"""
FOUND_SHARE = 0.2
"""share of the slips in judged frames of speech that are found (measured likewise)"""
LEAST_FOUND = 3
LIKELY, SURE = 1e-2, 1e-4
"""chance of finding as many without slips, below which slips are reported, and believed"""
COMB_PLACES = 60
"""places whose spacing is looked at"""
COMB_NEAR = 8
"""samples beside its place in the comb at which a slip still counts"""
COMB_MULTIPLES = 6
COMB_LEAST_S = 0.4
"""shortest interval looked for: 312 ppm, more than clocks of gateways differ"""


@dataclass(frozen=True, slots=True)
class Slips:
    """Slips found in the sound."""

    repeated: int
    """single samples found repeated in the judged part"""
    dropped: int
    """places found at which a sample is missing, likewise"""
    repeated_frames: int
    """frames of 8 to 240 samples found repeated as a whole, in the whole stream"""
    judged_s: float
    """how much of the sound could be judged for single samples"""
    interval_s: float
    """estimated time from slip to slip: by their spacing where it is regular, else by their number"""
    regular: bool
    """the slips lie at multiples of one interval, as those of two steady clocks do"""
    at_s: tuple[float, ...]
    """when; the first hundred"""
    confidence_pct: float


def slip_interval_s(skew_ppm: float) -> float:
    """Time between slips of 125 us between two clocks that differ by ``skew_ppm``; infinite where they do not. [s]"""
    return SLIP_S / (abs(skew_ppm) * 1e-6) if skew_ppm else float("inf")


def slips_per_day(skew_ppm: float) -> float:
    """Slips of 125 us a day between two clocks that differ by ``skew_ppm``."""
    return SECONDS_A_DAY / slip_interval_s(skew_ppm)


def slips_of(
    samples: Samples,
    sampling_rate_hz: int,
    received: Mask | None = None,
    packet_samples: int = 0,
    judged: Judged | None = None,
) -> Slips | None:
    """Slips in the sound of one stream.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        The timeline, of G.711 or another codec that keeps the waveform.
    sampling_rate_hz : int
        [Hz]
    received : bool array, shape (n,), optional
        Frames with samples that were not received are passed over.
    packet_samples : int, optional
        Samples in a packet. What lies at the edges of packets is a matter of packets, not of slips.
    judged : Judged, optional
        ``judged_frames`` of these samples, where it is known already.

    Returns
    -------
    Slips or None
        None where no more was found than chance would.

    Notes
    -----
    A method of our own. Where a sample is repeated, the samples after it do not follow from those before; with the
    sample taken out again they do. Likewise where one is missing, with one put in. So each place at which linear
    prediction fails is mended both ways, and counts where the mended sound is ordinary, and a single pulse of voice
    would not explain it. In tones and modems most slips are found. In speech a fifth of the repeated samples is, and no
    dropped one: numbers are those found, and the interval is an estimate.
    """
    frames = repeated_frames(samples, sampling_rate_hz, received)
    repeated, dropped, looked_at = _single(judged_frames(samples, received) if judged is None else judged)
    if packet_samples:
        repeated, dropped = (_inside_packets(places, packet_samples) for places in (repeated, dropped))
    judged_s = looked_at / sampling_rate_hz
    counts = (len(repeated), len(dropped))
    chances = [_chance(count, rate * judged_s) for count, rate in zip(counts, CHANCE_PER_S, strict=True)]
    interval = _comb(np.sort(np.concatenate([repeated, dropped])), sampling_rate_hz)
    believed = [count if chance < LIKELY else 0 for count, chance in zip(counts, chances, strict=True)]
    if interval > 0:
        believed = list(counts)
    if not any(believed) and not len(frames):
        return None
    places = np.sort(np.concatenate([repeated if believed[0] else [], dropped if believed[1] else [], frames]))
    if interval <= 0:
        expected = sum(believed) / FOUND_SHARE / max(judged_s, 1e-9) + len(frames) / (len(samples) / sampling_rate_hz)
        interval = sampling_rate_hz / expected
        # Dropped samples that keep to no interval may be notes of music that set in.
        regular, sure = False, 95.0 if len(frames) >= LEAST_FOUND else 85.0 if chances[0] < SURE else 60.0
    else:
        regular, sure = True, 97.0
    return Slips(
        believed[0],
        believed[1],
        len(frames),
        judged_s,
        interval / sampling_rate_hz,
        regular,
        tuple((places[:100] / sampling_rate_hz).tolist()),
        sure,
    )


def _single(judged: Judged) -> tuple[Places, Places, int]:
    """Places of single samples repeated and dropped, and how many samples were judged."""
    halves = np.mean(judged.x.reshape(len(judged.x), 2, FRAME // 2 + ORDER) ** 2, axis=2)
    steady = (judged.gain_db > STEADY_GAIN_DB) & (halves.max(axis=1) < STEADY_RATIO * halves.min(axis=1))
    part = judged.where(steady)
    frame, at = _mended_repeats(judged)
    other, there = _mended_drops(part)
    return _apart(judged.starts[frame] + at), _apart(part.starts[other] + there), len(judged.starts) * FRAME


def _mended_repeats(judged: Judged) -> tuple[Places, Places]:
    """Frame and sample of each sample that equals the one before and without which the sound is ordinary."""
    x = judged.x
    same = x[:, ORDER : ORDER + FRAME] == x[:, ORDER - 1 : ORDER - 1 + FRAME]
    frame, at = np.nonzero(same & (_over(judged.squares, ORDER + 1) > REPEAT_GAIN * judged.variance[:, None]))
    without = np.concatenate([np.arange(ORDER), np.arange(ORDER + 1, 2 * ORDER + 1)])
    after = np.sum(errors_of(x[frame[:, None], at[:, None] + without], judged.filters[frame]) ** 2, axis=1)
    return _healed(judged, frame, at, ORDER + 1, after, REPEAT_GAIN)


def _mended_drops(judged: Judged) -> tuple[Places, Places]:
    """Frame and sample of each sample before which another one, put in where it fits best, makes the sound ordinary."""
    frame, at = np.nonzero(judged.squares[:, :FRAME] > SHARP**2 * judged.variance[:, None])
    around = judged.x[frame[:, None], at[:, None] + np.arange(2 * ORDER)]
    shape = judged.filters[frame]
    errors = errors_of(np.insert(around, ORDER, 0.0, axis=1), shape)
    best = -np.sum(errors * shape, axis=1) / np.sum(shape * shape, axis=1)
    after = np.sum((errors + best[:, None] * shape) ** 2, axis=1)
    return _healed(judged, frame, at, ORDER, after, DROP_GAIN)


def _healed(
    judged: Judged, frame: Places, at: Places, width: int, after: NDArray[np.float64], gain: float
) -> tuple[Places, Places]:
    """Those places at which the error falls enough, more than the largest single error could explain."""
    errors, variance = judged.squares[frame[:, None], at[:, None] + np.arange(width)], judged.variance[frame]
    fallen = errors.sum(axis=1) - errors.max(axis=1, initial=0.0) - after
    good = (fallen > gain * variance) & (after < ORDINARY * ORDER * variance)
    return frame[good], at[good]


def _over(squares: NDArray[np.float64], width: int) -> NDArray[np.float64]:
    """Sum of ``width`` squares from each sample of the frame on."""
    sums = np.concatenate([np.zeros((len(squares), 1)), np.cumsum(squares, axis=1)], axis=1)
    ends = np.minimum(np.arange(FRAME) + width, squares.shape[1])
    return np.asarray(sums[:, ends] - sums[:, :FRAME])


def _apart(places: Places) -> Places:
    """Places in order, of those that are closer than the predictor is long only the first."""
    places = np.sort(places)
    return places[np.diff(places, prepend=-2 * ORDER) > ORDER]


def _inside_packets(places: Places, packet: int) -> Places:
    """Places that are not at the edge of a packet."""
    offset = (places + ORDER // 2) % packet
    return places[offset >= ORDER]


def _chance(count: int, expected: float) -> float:
    """Chance of ``count`` or more where ``expected`` come at random; 1 where they are too few to speak of."""
    if count < LEAST_FOUND:
        return 1.0
    if count > 100:
        return 0.0 if count > 2.0 * expected + 30.0 else 1.0
    return max(0.0, 1.0 - sum(exp(-expected) * expected**k / factorial(k) for k in range(count)))


def _comb(places: Places, rate: int) -> float:
    """Interval of which the places are multiples [samples], 0 where they are not more so than by chance."""
    if len(places) < LEAST_FOUND + 1:
        return 0.0
    if len(places) > COMB_PLACES:
        places = places[np.linspace(0, len(places) - 1, COMB_PLACES).astype(np.int64)]
    first, second = np.triu_indices(len(places), 1)
    apart = (places[second] - places[first]).astype(np.float64)
    intervals = (apart[:, None] / np.arange(1, COMB_MULTIPLES + 1)).ravel()
    origins = np.repeat(places[first], COMB_MULTIPLES)
    fits = intervals >= COMB_LEAST_S * rate
    intervals, origins = intervals[fits], origins[fits]
    best, found = SURE, 0.0
    for interval, origin in zip(intervals.tolist(), origins.tolist(), strict=True):
        off = (places - origin + interval / 2.0) % interval - interval / 2.0
        count = int((np.abs(off) <= COMB_NEAR).sum()) - 2
        near = min(1.0, (2 * COMB_NEAR + 1) / interval)
        if count < 2 or count + 2 < 0.5 * len(places):
            continue
        # Two of them made the comb; the others are there by chance with this probability, in any of the combs tried.
        by_chance = len(intervals) * comb(len(places) - 2, count) * near**count
        if by_chance < best:
            best, found = by_chance, interval
    return found
