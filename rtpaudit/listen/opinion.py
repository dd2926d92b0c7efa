"""What listeners think: mean opinion of each clip with its interval, and how far the listeners agree."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = NDArray[np.float64]
Matrix = NDArray[np.float64]

CONFIDENCE = 0.95


@dataclass(frozen=True, slots=True)
class Opinions:
    """Mean opinion of each clip. Shape (clips,); NaN where there are too few votes."""

    votes: NDArray[np.int64]
    mean: Values
    deviation: Values
    """standard deviation of the votes, with n - 1"""
    half_width: Values
    """of the 95 % interval"""

    @property
    def low(self) -> Values:
        """Lower end of the interval, which may lie below the scale."""
        return self.mean - self.half_width

    @property
    def high(self) -> Values:
        """Upper end of the interval, which may lie above the scale."""
        return self.mean + self.half_width


def opinions(matrix: Matrix) -> Opinions:
    """Mean opinion score of each clip with its 95 % confidence interval.

    Parameters
    ----------
    matrix : float64 array, shape (listeners, clips)
        Votes, NaN where there is none.

    References
    ----------
    ITU-T P.800, annex B (mean and interval over listeners), from memory. The interval is that of Student's t with
    n - 1 degrees of freedom, as listeners are few (ITU-T P.1401, from memory).
    """
    from scipy.special import stdtrit

    votes = (~np.isnan(matrix)).sum(axis=0)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.nansum(matrix, axis=0) / votes
        squares = np.nansum((matrix - mean) ** 2, axis=0)
        deviation = np.where(votes > 1, np.sqrt(squares / (votes - 1)), np.nan)
        t = stdtrit(np.maximum(votes - 1, 1), 0.5 + CONFIDENCE / 2)
        return Opinions(votes, mean, deviation, t * deviation / np.sqrt(votes))


def krippendorff_alpha(matrix: Matrix) -> float:
    """Agreement between listeners by Krippendorff's alpha for ordinal scales.

    Parameters
    ----------
    matrix : float64 array, shape (listeners, clips)
        Votes, NaN where there is none; clips with one vote are left out.

    Returns
    -------
    float
        1 for full agreement, 0 for what chance gives, below 0 where listeners contradict each other; NaN where
        everybody says the same of everything, or no clip has two votes.

    References
    ----------
    K. Krippendorff, Computing Krippendorff's Alpha-Reliability, 2011, section E and the ordinal metric, from memory.
    """
    values = np.unique(matrix[~np.isnan(matrix)])
    counts = (matrix[None, :, :] == values[:, None, None]).sum(axis=1).astype(np.float64)
    counts = counts[:, counts.sum(axis=0) > 1]
    if not counts.size:
        return math.nan
    weight = 1.0 / (counts.sum(axis=0) - 1.0)
    together = (counts * weight) @ counts.T
    together[np.diag_indices(len(values))] -= (counts * weight).sum(axis=1)
    total = counts.sum(axis=1)
    upto = np.cumsum(total)
    # Between two values lie the votes for all from the one to the other, those of the two themselves counted half.
    distance = (upto[None, :] - upto[:, None] - (total[None, :] - total[:, None]) / 2.0) ** 2
    expected = float((np.outer(total, total) * distance).sum())
    if expected == 0.0:
        return math.nan
    return 1.0 - (float(total.sum()) - 1.0) * float((together * distance).sum()) / expected


def correlation_with_others(matrix: Matrix) -> Values:
    """Each listener's correlation with the mean of all others over the clips. Shape (listeners,).

    A listener far below the rest heard something else, or took the scale the other way round (common practice).
    """
    found = np.full(len(matrix), np.nan)
    for k in range(len(matrix)):
        others = np.delete(matrix, k, axis=0)
        votes = (~np.isnan(others)).sum(axis=0)
        both = ~np.isnan(matrix[k]) & (votes > 0)
        if both.sum() > 2:
            mean = np.nansum(others[:, both], axis=0) / votes[both]
            found[k] = pearson(matrix[k, both], mean)
    return found


def pearson(x: Values, y: Values) -> float:
    """Correlation of two columns; NaN where one of them does not vary, or there are fewer than two values."""
    if len(x) < 2:
        return math.nan
    dx, dy = x - x.mean(), y - y.mean()
    scale = math.sqrt(float(dx @ dx) * float(dy @ dy))
    return float(dx @ dy) / scale if scale > 0.0 else math.nan
