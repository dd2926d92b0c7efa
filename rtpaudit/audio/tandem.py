"""A second coding by the other law of G.711, told from sample values that it can never give."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.audio.coding import octets_of, values
from rtpaudit.audio.scan import Samples

LEAST_EXPECTED = 150.0
"""samples that the values in question should have, by their neighbours, before their absence tells anything"""
MOST_SEEN = 0.1
"""share of these that may be there all the same: tones and errors on the way (common practice)"""
MOST_SAMPLES = 1 << 21
LEAST_VALUE = 8
ROUNDING = tuple(np.int16(shift) for shift in (-1, 0, 1))
OTHER = {"PCMU": "PCMA", "PCMA": "PCMU"}


@dataclass(frozen=True, slots=True)
class Tandem:
    """Signs of a coding by the other law before this one."""

    law: str
    """by which it was coded before"""
    expected: float
    """samples that the values which that law never gives should have, by their neighbours"""
    seen: int
    """samples that have them"""
    confidence_pct: float


def tandem_of(samples: Samples, encoding: str) -> Tandem | None:
    """Whether G.711 samples were coded by the other law before.

    Parameters
    ----------
    samples : int16 array, shape (n,)
        As decoded by the law of ``encoding``.
    encoding : str
        IANA media subtype.

    Returns
    -------
    Tandem or None
        None for another encoding, and where the sound shows all values.

    Notes
    -----
    An idea of our own: 16 of the 256 codes of either law lie farther from each value of the other than a neighbouring
    code does, so that a conversion never gives them (ITU-T G.711, Tables 3 and 4, has them skipped). Speech that was
    coded once has them as often as their neighbours.
    """
    if encoding not in OTHER:
        return None
    step = max(1, len(samples) // MOST_SAMPLES)
    counts = np.bincount(samples[::step].view(np.uint16), minlength=1 << 16)
    levels, given = np.unique(values(encoding)), _given(encoding)
    # Silence and the idle code have the values around 0 in shares of their own.
    skipped = np.flatnonzero(~np.isin(levels, given) & (np.abs(levels) > LEAST_VALUE))
    at = counts[levels.view(np.uint16)]
    expected = float(_between_neighbours(at, np.flatnonzero(np.isin(levels, given)), skipped).sum())
    seen = int(at[skipped].sum())
    if expected < LEAST_EXPECTED or seen > MOST_SEEN * expected:
        return None
    return Tandem(OTHER[encoding], expected, seen, 99.0 if seen < 0.01 * expected else 85.0)


def _given(encoding: str) -> Samples:
    """Values that a conversion from the other law gives, whichever way its encoder rounds halves."""
    other = values(OTHER[encoding])
    return np.unique(np.concatenate([values(encoding)[octets_of(other + shift, encoding)] for shift in ROUNDING]))


def _between_neighbours(
    counts: NDArray[np.int64], possible: NDArray[np.int64], skipped: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Least count of the nearest values on either side that the other law does give."""
    place = np.searchsorted(possible, skipped)
    below = counts[possible[np.maximum(place - 1, 0)]]
    above = counts[possible[np.minimum(place, len(possible) - 1)]]
    return np.minimum(below, above)
