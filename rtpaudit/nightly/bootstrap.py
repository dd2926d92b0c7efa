"""By how much tonight differs from the nights before, with an interval by resampling captures and nights."""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.nightly.intervals import Interval

REPLICATES = 1000
_CELLS_AT_ONCE = 4_000_000

Values = NDArray[np.float64]


def replicates(
    values: Values,
    weight: Values,
    cluster: NDArray[np.int64],
    q: float | None,
    draw: np.random.Generator,
    count: int = REPLICATES,
) -> Values:
    """A figure of calls on resampled captures: a share in percent, or the quantile ``q``.

    Parameters
    ----------
    values : float array, shape (n,)
        Of each call; 1 or 0 for a share.
    weight : float array, shape (n,)
        How many calls each stands for.
    cluster : int array, shape (n,)
        Which capture each call lies in, counted from 0: captures are drawn, with all that is in them.
    q : float or None
        The quantile; None for a share.
    draw : numpy.random.Generator
    count : int
        How many times.

    Returns
    -------
    float array, shape (count,)

    References
    ----------
    B. Efron (1979), Bootstrap methods: another look at the jackknife, Ann. Statist. 7, 1 to 26.
    """
    order = np.argsort(values, kind="stable")
    values, weight, cluster = values[order], weight[order], cluster[order]
    captures = int(cluster.max()) + 1
    at_once = max(_CELLS_AT_ONCE // max(len(values), captures), 1)
    parts = []
    for begin in range(0, count, at_once):
        size = min(at_once, count - begin)
        times = draw.multinomial(captures, np.full(captures, 1.0 / captures), size)
        mass = times[:, cluster] * weight
        parts.append(_shares(values, mass) if q is None else _quantiles(values, mass, q))
    return np.concatenate(parts)


def _shares(values: Values, mass: Values) -> Values:
    with np.errstate(invalid="ignore"):
        return np.asarray(100.0 * (mass @ values) / mass.sum(axis=1))


def _quantiles(values: Values, mass: Values, q: float) -> Values:
    reached = np.cumsum(mass, axis=1)
    place = (reached < q * reached[:, -1:] * (1.0 - 1e-12)).sum(axis=1)
    return np.asarray(values[np.minimum(place, len(values) - 1)])


def difference(tonight: Values, before: Values, value: float, draw: np.random.Generator) -> Interval:
    """Tonight less the mean of the nights before, with the percentile interval of 95 %; nights are drawn whole.

    Parameters
    ----------
    tonight : float array, shape (b,)
        Replicates of tonight's figure.
    before : float array, shape (m,)
        The figure of each night before.
    value : float
        Tonight's figure itself.
    draw : numpy.random.Generator
    """
    resampled = before[draw.integers(0, len(before), (len(tonight), len(before)))].mean(axis=1)
    apart = tonight - resampled
    low, high = np.nanpercentile(apart, [2.5, 97.5])
    return Interval(value - float(before.mean()), float(low), float(high))
