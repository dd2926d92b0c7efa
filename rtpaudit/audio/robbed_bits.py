"""Robbed-bit signalling left in the low bit of every sixth sample of a T1 channel."""

from dataclasses import dataclass

import numpy as np

from rtpaudit.audio.coding import LAWS, Octets
from rtpaudit.audio.sampling import Lengths, Positions, payload_groups
from rtpaudit.units import percent

SUPERFRAME = 24
"""frames of an extended superframe; bits are robbed in 6, 12, 18 and 24. RFC 2833, 3.14"""
EVERY = 6
GROUP, GROUPS = 100, 40
"""packets looked at together, in which slips must not move the frames, and groups spread over the stream"""
STUCK = 0.02
"""share of the other value up to which a bit is taken for stuck (a few packets may belong to another channel)"""
FREE = (0.15, 0.85)
"""share of ones between which the bits of all other frames lie; in silence they do not"""
LEAST_SAMPLES = 100
"""of each of the 24 frames"""


@dataclass(frozen=True, slots=True)
class RobbedBits:
    """Signalling bits found in the sound."""

    share_pct: float
    """of the passages that could be judged in which they were found"""
    passages: int
    """that could be judged: about 2 s each, with sound in them"""
    trunks: int
    """different places modulo six that are robbed: one for each T1 on the way that is not in step with the others"""
    confidence_pct: float


def robbed_bits_of(
    octets: Octets, start: Positions, length: Lengths, ticks: Positions, encoding: str
) -> RobbedBits | None:
    """Signalling bits in place of the low bit of every sixth sample.

    Parameters
    ----------
    octets : uint8 array, shape (octets,)
    start : int64 array, shape (n,)
    length : int32 array, shape (n,)
        Payload ``i`` is ``octets[start[i]:start[i] + length[i]]``, in order of sequence.
    ticks : int64 array, shape (n,)
        Unwrapped RTP timestamp of each packet. [samples]
    encoding : str
        IANA media subtype; only G.711 passes signalling bits on.

    Returns
    -------
    RobbedBits or None
        None for other encodings, and where nothing was found or nothing could be judged.

    Notes
    -----
    During a call the signalling bits A, B, C and D hardly change. So the low bits are counted by their place modulo 24:
    four places six apart at which the bit is stuck, while it is free at all others, are robbed ones.

    References
    ----------
    RFC 2833, 3.14 (frames 6, 12, 18, 24 of the extended superframe, 6 and 12 of the superframe).
    """
    if encoding.upper() not in LAWS:
        return None
    judged: list[int] = []
    for rows, payloads in payload_groups(octets, start, length, GROUP, GROUPS):
        places = _robbed_places(payloads, ticks[rows])
        if places >= 0:
            judged.append(places)
    found = [places for places in judged if places > 0]
    if not found or len(found) < 0.5 * len(judged):
        return None
    sure = 70.0 + 29.0 * min(1.0, len(found) / 5.0)
    return RobbedBits(percent(len(found), len(judged)), len(judged), int(np.median(found)), sure)


def _robbed_places(payloads: list[Octets], ticks: Positions) -> int:
    """How many places modulo six are robbed; -1 where the low bits of the others do not move freely either."""
    ones, counts = np.zeros(SUPERFRAME, np.int64), np.zeros(SUPERFRAME, np.int64)
    for payload, tick in zip(payloads, ticks.tolist(), strict=True):
        place = (tick + np.arange(len(payload))) % SUPERFRAME
        ones += np.bincount(place, payload & 1, SUPERFRAME).astype(np.int64)
        counts += np.bincount(place, minlength=SUPERFRAME)
    if counts.min() < LEAST_SAMPLES:
        return -1
    share = (ones / counts).reshape(SUPERFRAME // EVERY, EVERY)
    stuck = ((share < STUCK) | (share > 1.0 - STUCK)).all(axis=0)
    free = ((share > FREE[0]) & (share < FREE[1])).all(axis=0)
    return int(stuck.sum()) if (stuck | free).all() and free.sum() >= EVERY // 2 else -1
