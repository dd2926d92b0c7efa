"""How well predictions meet opinions, by the measures of ITU-T P.1401 (the text was not at hand: from memory)."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.listen.opinion import pearson

Values = NDArray[np.float64]

LEAST_CLIPS = 3
"""below which neither a mapping nor an error after it says anything"""
NORMAL_95 = 1.959964


@dataclass(frozen=True, slots=True)
class Mapping:
    """First-order mapping: opinion is about ``offset + slope * prediction``."""

    offset: float
    slope: float

    def __call__(self, predicted: Values) -> Values:
        """Predictions on the scale of these listeners."""
        return self.offset + self.slope * predicted


@dataclass(frozen=True, slots=True)
class Accuracy:
    """Predictions against opinions over clips; NaN where there are too few."""

    clips: int
    correlation: float
    """Pearson's"""
    correlation_low: float
    """95 % interval by Fisher's transformation"""
    correlation_high: float
    rmse: float
    """root mean square error without mapping"""
    rmse_mapped: float
    """the same after the first-order mapping"""
    rmse_epsilon: float
    """RMSE*: what the mapped errors exceed the 95 % interval of the opinions by"""
    outlier_ratio: float
    """share of clips whose mapped error exceeds that interval"""
    mapping: Mapping | None
    """None where it would not rise, or the clips are too few"""


def accuracy(predicted: Values, opinion: Values, half_width: Values) -> Accuracy:
    """Correlation and errors of predictions.

    Parameters
    ----------
    predicted, opinion : float64 array, shape (clips,)
        MOS of each clip; clips where either is NaN are left out.
    half_width : float64 array, shape (clips,)
        Of the 95 % interval of each opinion; clips without one do not count in RMSE* and outlier ratio.

    Notes
    -----
    Errors are divided by N - d, where d counts what was fitted: 1 without mapping, 2 with one of first order. The
    mapping takes out that listeners of one check use the scale in their own way; it has to rise. RMSE* forgives what
    lies within the uncertainty of the listeners themselves.

    References
    ----------
    ITU-T P.1401 (Pearson correlation, root mean square error, epsilon-insensitive RMSE*, outlier ratio, first-order
    mapping), from memory.
    """
    known = ~(np.isnan(predicted) | np.isnan(opinion))
    x, y, width = predicted[known], opinion[known], half_width[known]
    r = pearson(x, y)
    low, high = _fisher(r, len(x))
    mapping = first_order(x, y)
    nothing = math.nan
    mapped = epsilon = outliers = nothing
    if mapping is not None:
        error = y - mapping(x)
        mapped = _root(error, 2)
        told = ~np.isnan(width)
        beyond = np.maximum(np.abs(error[told]) - width[told], 0.0)
        epsilon = _root(beyond, 2)
        outliers = float((beyond > 0.0).mean()) if len(beyond) else nothing
    return Accuracy(len(x), r, low, high, _root(y - x, 1), mapped, epsilon, outliers, mapping)


def first_order(predicted: Values, opinion: Values) -> Mapping | None:
    """The straight line of least squares; None where it does not rise, or the clips are too few."""
    if len(predicted) < LEAST_CLIPS:
        return None
    dx = predicted - predicted.mean()
    spread = float(dx @ dx)
    slope = float(dx @ opinion) / spread if spread > 0.0 else 0.0
    return Mapping(float(opinion.mean()) - slope * float(predicted.mean()), slope) if slope > 0.0 else None


def _root(error: Values, fitted: int) -> float:
    return math.sqrt(float(error @ error) / (len(error) - fitted)) if len(error) > fitted else math.nan


def _fisher(r: float, count: int) -> tuple[float, float]:
    if math.isnan(r) or count <= 3:
        return math.nan, math.nan
    if abs(r) >= 1.0:
        return r, r
    z, reach = math.atanh(r), NORMAL_95 / math.sqrt(count - 3)
    return math.tanh(z - reach), math.tanh(z + reach)
