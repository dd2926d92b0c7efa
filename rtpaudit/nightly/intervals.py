"""Shares and quantiles of calls, some of which stand for several, and the intervals within which they are known."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Z_95 = 1.959963984540054
"""Two-sided 95 % point of the normal distribution."""

FEW_CALLS = 30
"""Below this number of calls a figure is said to rest on few (common practice)."""

Weights = NDArray[np.float64]
Values = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Interval:
    """A figure with the interval in which it lies with 95 % confidence."""

    value: float
    low: float
    high: float


def effective_count(weight: Weights) -> float:
    """How many calls of equal weight tell as much: (sum w)^2 / sum w^2 (Kish 1965, from memory)."""
    squares = float(np.square(weight).sum())
    return float(weight.sum()) ** 2 / squares if squares else 0.0


def share(flags: NDArray[np.bool_], weight: Weights) -> float:
    """Share of the weight that is flagged. [0 to 1]  NaN without weight."""
    total = float(weight.sum())
    return float(weight[flags].sum()) / total if total else float("nan")


def wilson(p: float, count: float, z: float = Z_95) -> tuple[float, float]:
    """Score interval of a share, which stays within 0 and 1 and has a width where the share is 0.

    Parameters
    ----------
    p : float
        The share in the sample. [0 to 1]
    count : float
        Calls that it rests on.
    z : float
        Point of the normal distribution.

    References
    ----------
    E. B. Wilson (1927), Probable inference, the law of succession, and statistical inference, JASA 22, 209 to 212.
    """
    if not count > 0 or p != p:
        return float("nan"), float("nan")
    shrink = 1.0 + z * z / count
    centre = (p + z * z / (2.0 * count)) / shrink
    half = z / shrink * float(np.sqrt(p * (1.0 - p) / count + z * z / (4.0 * count * count)))
    return max(centre - half, 0.0), min(centre + half, 1.0)


def quantile(values: Values, weight: Weights, q: float) -> float:
    """Smallest value that at least a share ``q`` of the weight stays at or below. NaN without values."""
    if not len(values):
        return float("nan")
    order = np.argsort(values, kind="stable")
    reached = np.cumsum(weight[order])
    # A hair less, so that half of 0.1 + 0.2 + 0.3 counts as half whatever its last bit.
    place = int(np.searchsorted(reached, q * reached[-1] * (1.0 - 1e-12)))
    return float(values[order][min(place, len(values) - 1)])


def quantile_interval(values: Values, weight: Weights, q: float, z: float = Z_95) -> tuple[float, float]:
    """Interval of a quantile by order statistics: the quantiles at the ends of the score interval of ``q``.

    References
    ----------
    R. S. Woodruff (1952), Confidence intervals for medians and other position measures, JASA 47, 635 to 646 (from
    memory), with the interval of Wilson (1927) for the share.
    """
    if not len(values):
        return float("nan"), float("nan")
    low, high = wilson(q, effective_count(weight), z)
    return quantile(values, weight, low), quantile(values, weight, high)


def narrowed(interval: Interval, sampled: float, population: float) -> Interval:
    """The interval of a sample without replacement out of a finite population: narrower by sqrt(1 - n / N).

    References
    ----------
    W. G. Cochran (1977), Sampling Techniques, 2.6, finite population correction (from memory).
    """
    factor = float(np.sqrt(max(1.0 - sampled / population, 0.0))) if population > 0 else 1.0
    return Interval(
        interval.value,
        interval.value - factor * (interval.value - interval.low),
        interval.value + factor * (interval.high - interval.value),
    )
