"""Night against night: whether tonight differs, where a series stepped, and how sure that is with many series at once.

Nights differ among themselves by more than the luck of the draw, so a night is judged against the spread of the nights
before it and not against that of the calls in it alone.
"""

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

LEAST_NIGHTS = 7
"""Fewer nights before tell nothing of how nights differ (common practice: a week)."""

LEAST_SIDE = 2
"""Nights on either side of a step."""

Values = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Step:
    """From one night on a series had another level."""

    place: int
    """first night of the new level"""
    before: float
    after: float
    p: float
    """bound on the probability of such a step in a series that has none"""


def steadied_share(p: Values | float, count: Values | float) -> Values:
    """A share brought to a scale on which its spread hardly depends on it: about 1 / (2 sqrt(n + 1/2)).

    References
    ----------
    F. J. Anscombe (1948), The transformation of Poisson, binomial and negative-binomial data, Biometrika 35, 246.
    """
    hits = np.asarray(p) * count
    return np.arcsin(np.sqrt((hits + 0.375) / (np.asarray(count) + 0.75)))


def prediction_p(tonight: float, before: Values, spread: float) -> float:
    """Probability of a night as far from the mean of the nights before, either way, if nothing changed.

    Parameters
    ----------
    tonight : float
        Tonight's value.
    before : float array, shape (m,)
        Values of the nights before, m at least 2.
    spread : float
        Standard error of tonight's value by the calls in it; the nights are not taken to differ by less.

    References
    ----------
    Prediction interval of one further observation from a normal sample: G. J. Hahn (1969), Factors for calculating
    two-sided prediction intervals for samples from a normal distribution, JASA 64, 878 to 888 (from memory).
    """
    from scipy.stats import t

    m = len(before)
    deviation = max(float(np.std(before, ddof=1)), spread)
    if deviation == 0.0:
        return 1.0 if tonight == before.mean() else 0.0
    statistic = abs(tonight - float(before.mean())) / (deviation * np.sqrt(1.0 + 1.0 / m))
    return float(2.0 * t.sf(statistic, m - 1))


def exact_p(hits: float, count: float, hits_before: float, count_before: float) -> float:
    """Probability of two shares as different if they were one, by Fisher's exact test; counts are rounded.

    References
    ----------
    R. A. Fisher (1935), The logic of inductive inference, JRSS 98, 39 to 82 (from memory).
    """
    from scipy.stats import fisher_exact

    table = [
        [round(hits), max(round(count) - round(hits), 0)],
        [round(hits_before), max(round(count_before) - round(hits_before), 0)],
    ]
    return float(fisher_exact(table)[1])


def holm(p: Sequence[float], alpha: float) -> list[bool]:
    """Which of several findings stand, so that with probability 1 - ``alpha`` no single one of them is an error.

    References
    ----------
    S. Holm (1979), A simple sequentially rejective multiple test procedure, Scand. J. Statist. 6, 65 to 70.
    """
    stands = [False] * len(p)
    for rank, place in enumerate(sorted(range(len(p)), key=lambda k: p[k])):
        if not p[place] <= alpha / (len(p) - rank):
            break
        stands[place] = True
    return stands


def largest_step(values: Values, spread: Values) -> Step | None:
    """The place where a series most likely stepped, with a bound on the probability of that by chance.

    The statistic is the largest of the two-sample t over all places; the bound is the sum of the probabilities of each
    (Bonferroni), so it is on the safe side.

    Parameters
    ----------
    values : float array, shape (n,)
        One value a night, in order.
    spread : float array, shape (n,)
        Standard error of each by the calls in it; the nights are not taken to differ by less.

    References
    ----------
    K. J. Worsley (1979), On the likelihood ratio test for a shift in location of normal populations, JASA 74, 365.
    """
    from scipy.stats import t

    n = len(values)
    if n < 2 * LEAST_SIDE + 1:
        return None
    k = np.arange(LEAST_SIDE, n - LEAST_SIDE + 1)
    centred = values - values.mean()
    sums = np.cumsum(centred)
    left, right = sums[k - 1] / k, (sums[-1] - sums[k - 1]) / (n - k)
    within = np.maximum(np.square(centred).sum() - k * left**2 - (n - k) * right**2, 0.0) / (n - 2)
    floor = float(np.mean(np.square(spread)))
    variance = np.maximum(within, floor) * (1.0 / k + 1.0 / (n - k))
    with np.errstate(divide="ignore", invalid="ignore"):
        statistic = np.where(left == right, 0.0, np.abs(left - right) / np.sqrt(variance))
    best = int(np.argmax(statistic))
    place = int(k[best])
    p = min(len(k) * float(2.0 * t.sf(statistic[best], n - 2)), 1.0)
    return Step(place, float(values[:place].mean()), float(values[place:].mean()), p)


def steps(values: Values, spread: Values, alpha: float) -> list[Step]:
    """All steps of a series that stand at ``alpha``, in order.

    References
    ----------
    L. J. Vostrikova (1981), Detecting "disorder" in multidimensional random processes, Sov. Math. Dokl. 24, 55 to 59
    (binary segmentation; from memory).
    """
    found: list[int] = []
    chances: dict[int, float] = {}
    todo = [(0, len(values))]
    while todo:
        begin, end = todo.pop()
        step = largest_step(values[begin:end], spread[begin:end])
        if step is None or step.p > alpha:
            continue
        found.append(begin + step.place)
        chances[begin + step.place] = step.p
        todo += [(begin, begin + step.place), (begin + step.place, end)]
    edges = [0, *sorted(found), len(values)]
    levels = [float(values[a:b].mean()) for a, b in itertools.pairwise(edges)]
    return [Step(place, levels[k], levels[k + 1], chances[place]) for k, place in enumerate(sorted(found))]
