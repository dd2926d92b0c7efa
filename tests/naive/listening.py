"""Slow versions of what a listening check works out, written from the definitions."""

import itertools
import math
from collections.abc import Sequence

import numpy as np


def loudest_window(samples: Sequence[int], window: int) -> float:
    """Greatest root mean square over so many samples in a row, silence before and after the sound counted in."""
    squares = [float(x) ** 2 for x in samples]
    padded = [0.0] * (window - 1) + squares + [0.0] * (window - 1)
    return max(math.sqrt(sum(padded[k : k + window]) / window) for k in range(len(padded) - window + 1))


def krippendorff_alpha(matrix: Sequence[Sequence[float]]) -> float:
    """Ordinal alpha by its definition: disagreement within clips over disagreement of all pairs that could be made."""
    columns = [[row[k] for row in matrix if not math.isnan(row[k])] for k in range(len(matrix[0]))]
    columns = [column for column in columns if len(column) > 1]
    votes = [vote for column in columns for vote in column]
    if not votes:
        return math.nan

    def distance(one: float, other: float) -> float:
        low, high = min(one, other), max(one, other)
        between = sum(low <= vote <= high for vote in votes)
        return (between - (votes.count(low) + votes.count(high)) / 2.0) ** 2

    observed = sum(
        distance(one, other) / (len(column) - 1)
        for column in columns
        for one, other in itertools.permutations(column, 2)
    ) / len(votes)
    expected = sum(distance(one, other) for one, other in itertools.permutations(votes, 2))
    expected /= len(votes) * (len(votes) - 1)
    return 1.0 - observed / expected if expected else math.nan


def limiting_gain(signal: Sequence[float], peak: float, windows: Sequence[tuple[int, float]]) -> list[float]:
    """Greatest gain of each sample that keeps all limits, without any gliding."""
    count = len(signal)
    gain = [min(1.0, peak / max(abs(x), 1.0)) for x in signal]
    for window, limit in windows:
        for first in range(1 - window, count):
            inside = range(max(first, 0), min(first + window, count))
            level = math.sqrt(sum(signal[k] ** 2 for k in inside) / window)
            for k in inside:
                gain[k] = min(gain[k], limit / level) if level > limit else gain[k]
    return list(np.asarray(gain))
