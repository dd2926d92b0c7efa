"""What came out of the earpiece: the sent timeline with losses concealed, late packets left out, pauses filled.

Everything stays where it was sent: the playout delay and the delay of the concealment are taken out.
"""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.playout.concealment import conceal_runs

Samples = NDArray[np.int16]
Positions = NDArray[np.int64]
Stretches = tuple[Positions, Positions]
"""first samples, and the samples after the last ones"""


def lost_stretches(
    position: Positions,
    samples: NDArray[np.int64],
    sequence: NDArray[np.int64],
    segment: NDArray[np.int32],
    played: NDArray[np.bool_],
) -> Stretches:
    """Stretches of the timeline whose packets were lost or came too late.

    Parameters
    ----------
    position : int64 array, shape (n,)
        Place on the timeline of each distinct packet of the stream, whatever it carries. [samples]
    samples : int64 array, shape (n,)
        Samples that it carries, 0 where it is no audio.
    sequence, segment : integer arrays, shape (n,)
        Extended sequence numbers and segments.
    played : bool array, shape (n,)
        False for packets that came too late.

    Returns
    -------
    begin, end : int64 array, shape (stretches,)
        Ascending, none touching the next. [samples]

    Notes
    -----
    Missing packets are as long as the one before them and follow it at once; what media time is left before the next
    packet is a pause, unless it is shorter than a packet.
    """
    order = np.lexsort((sequence, segment))
    before, after = order[:-1], order[1:]
    missing = np.where(segment[before] == segment[after], sequence[after] - sequence[before] - 1, 0)
    gap_begin = position[before] + samples[before]
    gap = position[after] - gap_begin
    lost = missing * samples[before]
    lost = np.where(np.abs(gap - lost) < samples[before], gap, np.minimum(gap, lost))
    holes = (missing > 0) & (lost > 0)
    late = ~played & (samples > 0)
    begin = np.concatenate([gap_begin[holes], position[late]])
    end = np.concatenate([(gap_begin + lost)[holes], (position + samples)[late]])
    return _joined(begin, end)


def noise_stretches(
    position: Positions, sequence: NDArray[np.int64], segment: NDArray[np.int32], noise: NDArray[np.bool_], total: int
) -> Stretches:
    """Stretch that each comfort-noise packet stands for: until the next packet of the stream, whatever it carries.

    Parameters
    ----------
    position, sequence, segment
        As for ``lost_stretches``.
    noise : bool array, shape (n,)
        True for the comfort-noise packets.
    total : int
        Length of the timeline. [samples]

    Returns
    -------
    begin, end : int64 array, shape (noise packets,)
        In order of the stream. [samples]
    """
    order = np.lexsort((sequence, segment))
    begin = np.clip(position[order], 0, total)
    end = np.maximum(np.append(begin[1:], total), begin)
    return begin[noise[order]], end[noise[order]]


def heard(sent: Samples, lost: Stretches, conceals: bool, in_place: bool = False) -> Samples:
    """The timeline with its lost stretches filled.

    Parameters
    ----------
    sent : int16 array, shape (n,)
        Every received payload at its place, silence elsewhere.
    lost : pair of int64 arrays, shape (stretches,)
        As ``lost_stretches`` gives them. What came too late is overwritten.
    conceals : bool
        Conceal by ITU-T G.711 Appendix I (8000 samples a second); else silence.
    in_place : bool
        Whether ``sent`` itself is written to: a call of hours has no room for two.

    Returns
    -------
    int16 array, shape (n,)
        Aligned with ``sent``.
    """
    begin, end = lost
    if conceals:
        return conceal_runs(sent, begin, end, in_place)
    edges = np.zeros(len(sent) + 1, np.int8)
    edges[np.clip(begin, 0, len(sent))] += 1
    edges[np.clip(end, 0, len(sent))] -= 1
    made = sent if in_place else sent.copy()
    made[np.cumsum(edges[:-1], dtype=np.int8) > 0] = 0
    return made


def _joined(begin: Positions, end: Positions) -> Stretches:
    """Stretches in order, those that overlap or touch made one."""
    order = np.argsort(begin, kind="stable")
    begin, reach = begin[order], np.maximum.accumulate(end[order])
    first = np.append(True, begin[1:] > reach[:-1])[: len(begin)]
    last = np.append(first[1:], True)[: len(begin)]
    return begin[first], reach[last]
