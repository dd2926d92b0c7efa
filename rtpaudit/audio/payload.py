"""Faults in the payload octets themselves: the same payload again and again, and idle code.

Payloads lie in one buffer of octets: payload ``i`` is ``octets[start[i]:start[i] + length[i]]``, in order of their
sequence numbers. What would leave the buffer is left out.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.coding import LAWS, Octets, values
from rtpaudit.kernels import kernel
from rtpaudit.units import percent

Positions = NDArray[np.int64]
Lengths = NDArray[np.int32]

IDLE = {"PCMU": (0xFF, 0x7F), "PCMA": (0xD5, 0x55)}
"""codes of the smallest magnitude: what a line sends on which nothing is connected. ITU-T G.711, Tables 1 and 2"""
FOREIGN_IDLE = {"PCMU": (0xD5, 0x55), "PCMA": (0xFF, 0x7F)}
LEAST_PACKETS = 50
"""one second of packets of 20 ms"""
REPEATED_RUN = 3
"""copies in a row from which on a repetition is one and not chance (common practice)"""
TONE_LINES = 2
TONE_SHARE = 0.95
"""a payload whose power lies in so few lines may be a period of a tone that really goes on"""
SHORT_OCTETS = 20
"""a payload this short may say no more than that nothing is said"""


@dataclass(frozen=True, slots=True)
class Repetition:
    """The same payload sent again and again."""

    packets: int
    """packets that repeat the one before them, in runs of three and more"""
    share_pct: float
    longest_run: int
    """packets in the longest run of copies"""
    first: int
    """row of the first packet of that run"""
    confidence_pct: float


@dataclass(frozen=True, slots=True)
class Idle:
    """Packets that hold nothing but idle code."""

    packets: int
    share_pct: float
    foreign_packets: int
    """packets that hold nothing but the idle code of the other law"""
    whole_call: bool
    """nothing else was ever sent"""
    confidence_pct: float


def repetition_of(octets: Octets, start: Positions, length: Lengths, encoding: str) -> Repetition | None:
    """Payloads that are the same as the one before.

    Parameters
    ----------
    octets : uint8 array, shape (octets,)
    start : int64 array, shape (n,)
    length : int32 array, shape (n,)
    encoding : str
        IANA media subtype.

    Returns
    -------
    Repetition or None
        None where no payload came three times in a row. Payloads of one value only (silence), and payloads of G.711
        that are periods of one or two frequencies (a tone that really goes on), are no repetition; nor are payloads of
        other codecs so short that they may say silence.

    Notes
    -----
    Common practice: noise of the line alone makes two payloads of speech or of a pause differ.
    """
    same, _ = _compared(octets, start, length, encoding)
    starts, ends = _runs(same)
    long = ends - starts >= REPEATED_RUN
    kept = [
        (first, last)
        for first, last in zip(starts[long].tolist(), ends[long].tolist(), strict=True)
        if _is_sound(octets[start[first] : start[first] + length[first]], encoding)
    ]
    if not kept:
        return None
    first, last = max(kept, key=lambda run: run[1] - run[0])
    packets = sum(end - begin for begin, end in kept)
    sure = 99.0 if encoding.upper() in LAWS else 70.0
    return Repetition(packets, percent(packets, len(start)), last - first, first - 1, min(sure, 60.0 + 5.0 * packets))


def idle_of(octets: Octets, start: Positions, length: Lengths, encoding: str) -> Idle | None:
    """How much of a G.711 stream is nothing but idle code; None for other encodings and under a second of packets.

    Parameters
    ----------
    octets : uint8 array, shape (octets,)
    start : int64 array, shape (n,)
    length : int32 array, shape (n,)
    encoding : str
        IANA media subtype.

    Returns
    -------
    Idle or None
    """
    if encoding.upper() not in LAWS or len(start) < LEAST_PACKETS:
        return None
    kind = _compared(octets, start, length, encoding)[1]
    own, foreign = int((kind == 1).sum()), int((kind == 2).sum())
    whole = own + foreign == len(start)
    return Idle(own, percent(own, len(start)), foreign, whole, 99.0 if whole else 90.0)


def _compared(
    octets: Octets, start: Positions, length: Lengths, encoding: str
) -> tuple[NDArray[np.bool_], NDArray[np.uint8]]:
    """Which payloads are those before them again, and which hold idle code (1: own, 2: of the other law)."""
    same, kind = np.zeros(len(start), np.bool_), np.zeros(len(start), np.uint8)
    classes = np.zeros(256, np.uint8)
    for number, codes in enumerate((IDLE.get(encoding.upper(), ()), FOREIGN_IDLE.get(encoding.upper(), ())), 1):
        classes[list(codes)] = number
    inside = (start >= 0) & (start + length <= len(octets))
    held = np.where(inside, length, 0).astype(np.int64)
    _compare(octets, np.ascontiguousarray(start, np.int64), held, classes, same, kind)
    return same, kind


def _runs(flags: NDArray[np.bool_]) -> tuple[Positions, Positions]:
    """First element of each run of True, and the one after its last."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8)))
    return edges[::2], edges[1::2]


def _is_sound(payload: Octets, encoding: str) -> bool:
    """Whether a payload says more than silence, or than one period of a tone."""
    if encoding.upper() not in LAWS:
        return len(payload) > SHORT_OCTETS and len(np.unique(payload)) > 2
    samples = values(encoding.upper())[payload].astype(np.float64)
    power = np.abs(np.fft.rfft(samples - samples.mean())) ** 2
    whole = float(power.sum())
    if whole <= 0.0 or len(np.unique(np.abs(samples))) < 3:
        return False
    return float(np.sort(power)[-TONE_LINES:].sum()) < TONE_SHARE * whole


@kernel
def _compare(
    octets: Octets,
    start: Positions,
    held: Positions,
    classes: Octets,
    same: NDArray[np.bool_],
    kind: NDArray[np.uint8],
) -> None:
    """Payload by payload, up to the first octet that decides."""
    for i in range(len(start)):
        if held[i] == 0:
            continue
        if i > 0 and held[i] == held[i - 1]:
            j = 0
            while j < held[i] and octets[start[i] + j] == octets[start[i - 1] + j]:
                j += 1
            same[i] = j == held[i]
        first = classes[octets[start[i]]]
        j = 0
        while j < held[i] and first > 0 and classes[octets[start[i] + j]] == first:
            j += 1
        if j == held[i]:
            kind[i] = first
