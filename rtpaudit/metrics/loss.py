"""Every sequence number of a stream accounted for: expected, received, lost, duplicated, reordered."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.kernels import kernel
from rtpaudit.metrics.arrays import column

Numbers = NDArray[np.int64]
Indices = NDArray[np.int64]
Places = NDArray[np.int64]

MASK_LIMIT = 1 << 26
"""Longest mask that is made, one octet per expected packet: two weeks of 20 ms packets."""

MOVES_PER_PACKET = 64
"""Steps of the insertion sort before a general one takes over: late packets are few and come soon (RFC 3550 A.1)."""


@dataclass(frozen=True, slots=True)
class Sequence:
    """The distinct packets of a stream in order of segment and number, and what is missing between them."""

    order: Indices
    """index into the columns of arrival, shape (received,)"""
    place: Places
    """place among all expected packets, counted from 0, the segments one behind the other; shape (received,)"""
    captured: int
    reordered: int
    segments: int
    gaps: int
    """runs of missing numbers"""
    longest_gap: int

    @property
    def received(self) -> int:
        """Distinct extended sequence numbers. [packets]"""
        return len(self.order)

    @property
    def expected(self) -> int:
        """Highest minus lowest number plus one, summed over segments (RFC 3550 A.3). [packets]"""
        return int(self.place[-1]) + 1

    @property
    def lost(self) -> int:
        """Expected packets that did not arrive; duplicates hide none. [packets]"""
        return self.expected - self.received

    @property
    def duplicated(self) -> int:
        """Arrivals of a number that had come before. [packets]"""
        return self.captured - self.received


@dataclass(frozen=True, slots=True)
class MissingRuns:
    """Runs of missing numbers in order of the stream. Shape (gaps,)."""

    segment: NDArray[np.int32]
    first_missing: Numbers
    """extended sequence number"""
    packets: NDArray[np.int64]
    position: Indices
    """index into ``Sequence.order`` of the packet before the run"""
    before: Indices
    """arrival of the packet before the run in sequence"""
    after: Indices
    """arrival of the packet after it"""


def in_sequence(extended: ArrayLike, segment: ArrayLike, duplicate: ArrayLike) -> Sequence:
    """The distinct packets of a stream, put in order, with their place among the expected ones.

    Takes one pass where nothing is out of order, and little more where late packets come soon.

    Parameters
    ----------
    extended : int64 array, shape (n,)
        Unwrapped sequence numbers in order of arrival. [packets]
    segment : int32 array, shape (n,)
    duplicate : bool array, shape (n,)
        Exactly one packet of each segment and number is not marked.

    Returns
    -------
    Sequence

    Raises
    ------
    ValueError
        If there is no packet that is no duplicate: a stream has at least one.

    References
    ----------
    RFC 3550 A.3 for expected, with the difference that a late first packet counts. RFC 4737 3.3 for reordering: a
    packet below the highest so far; every packet of an earlier segment is below those of a later one.
    """
    numbers = column(extended, np.int64)
    segments = column(segment, np.int32, len(numbers))
    copies = column(duplicate, np.bool_, len(numbers))
    order = np.empty(len(numbers), np.int64)
    received, reordered, sorted_ = _insert(numbers, segments, copies, order, MOVES_PER_PACKET * len(numbers))
    if received == 0:
        raise ValueError("a stream has at least one packet that is no duplicate")
    if not sorted_:
        order = np.flatnonzero(~copies)
        order = order[np.lexsort((numbers[order], segments[order]))]
    order = order[:received]
    place = np.empty(received, np.int64)
    count, gaps, longest = _lay_out(numbers, segments, order, place)
    return Sequence(order, place, len(numbers), reordered, count, gaps, longest)


def missing_runs(sequence: Sequence, extended: ArrayLike, segment: ArrayLike) -> MissingRuns:
    """Runs of missing numbers, each with the packets on both sides of it.

    Parameters
    ----------
    sequence : Sequence
        Of the same stream.
    extended : int64 array, shape (n,)
        [packets]
    segment : int32 array, shape (n,)

    Returns
    -------
    MissingRuns
        A run lies within one segment: between segments nothing is known to be missing.
    """
    numbers, segments = column(extended, np.int64), column(segment, np.int32)
    if not sequence.gaps:
        none = np.empty(0, np.int64)
        return MissingRuns(none.astype(np.int32), none, none, none, none, none)
    step = np.diff(sequence.place)
    position = np.flatnonzero(step > 1)
    before, after = sequence.order[position], sequence.order[position + 1]
    return MissingRuns(segments[before], numbers[before] + 1, step[position] - 1, position, before, after)


def received_mask(sequence: Sequence) -> NDArray[np.bool_]:
    """One element per expected packet, true where it was received.

    Returns
    -------
    bool array, shape (expected,)

    Raises
    ------
    ValueError
        Above ``MASK_LIMIT``, which only forged numbers reach. ``Sequence.place`` says the same in bounded memory.
    """
    if sequence.expected > MASK_LIMIT:
        raise ValueError(f"{sequence.expected} expected packets are too many for a mask; use Sequence.place")
    mask = np.zeros(sequence.expected, np.bool_)
    mask[sequence.place] = True
    return mask


@kernel
def _insert(
    extended: Numbers, segment: NDArray[np.int32], duplicate: NDArray[np.bool_], order: Indices, moves: int
) -> tuple[int, int, bool]:
    """Insertion sort of the distinct packets by segment and number; counts those below the highest so far."""
    received = reordered = highest = 0
    for i in range(len(extended)):
        if duplicate[i]:
            continue
        at = received
        if received:
            if segment[i] < segment[highest] or (segment[i] == segment[highest] and extended[i] < extended[highest]):
                reordered += 1
                while at > 0 and moves > 0:
                    other = order[at - 1]
                    if segment[other] < segment[i] or (segment[other] == segment[i] and extended[other] <= extended[i]):
                        break
                    order[at] = other
                    at -= 1
                    moves -= 1
            else:
                highest = i
        else:
            highest = i
        order[at] = i
        received += 1
    return received, reordered, moves > 0


@kernel
def _lay_out(extended: Numbers, segment: NDArray[np.int32], order: Indices, place: Places) -> tuple[int, int, int]:
    """Places among the expected packets; counts segments and gaps, and finds the longest gap."""
    segments, gaps, longest = 1, 0, 0
    place[0] = 0
    for k in range(1, len(order)):
        step = extended[order[k]] - extended[order[k - 1]]
        if segment[order[k]] != segment[order[k - 1]]:
            segments += 1
            step = 1
        elif step > 1:
            gaps += 1
            longest = max(longest, step - 1)
        place[k] = place[k - 1] + step
    return segments, gaps, longest
