"""What nights are compared by: each measure is a share of calls or a quantile over calls, of any group of them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray

from rtpaudit.nightly.intervals import Interval, effective_count, quantile, quantile_interval, share, wilson

if TYPE_CHECKING:
    from pandas import DataFrame

# Ratings at which the bands of ITU-T G.109 (09/1999), table 1, begin.
BANDS = {"best": 90.0, "high": 80.0, "medium": 70.0, "low": 60.0, "poor": 50.0}

FAILED_OUTCOMES = ("failed", "no reply")
# RFC 6076, 4.7: what a 480, 486, 600 or 603 says is the called user's doing, as an answer is.
USERS_DOING = (480, 486, 600, 603)
# RFC 6076, 4.8.
INEFFECTIVE = (408, 500, 503, 504)
LOSS_LIMIT_PCT = 1.0
"""From here on loss is heard without concealment (common practice)."""
NEAR_WORST, NEAR_BEST = 0.05, 0.95

Worse = Literal["more", "less"]


@dataclass(frozen=True, slots=True)
class Measure:
    """One measure: of which calls, and what of them."""

    name: str
    label: str
    """as people read it"""
    unit: str
    worse: Worse
    of: Callable[[DataFrame], Any]
    """for each call a number; for a share 1 or 0; NaN where the call has no say"""
    q: float | None = None
    """the quantile; None for a share, which is told in percent"""

    def values(self, calls: DataFrame) -> NDArray[np.float64]:
        """The calls' values, NaN where one has no say."""
        return np.asarray(self.of(calls), np.float64)


@dataclass(frozen=True, slots=True)
class Figure:
    """A measure of a group of calls."""

    interval: Interval
    count: int
    """calls that it rests on"""
    effective: float
    """calls of equal weight that would tell as much"""


def figure(measure: Measure, values: NDArray[np.float64], weight: NDArray[np.float64]) -> Figure:
    """A measure of calls by their values; NaN where none has a say."""
    there = ~np.isnan(values)
    values, weight = values[there], weight[there]
    effective = effective_count(weight)
    if measure.q is None:
        p = share(values > 0.5, weight)
        low, high = wilson(p, effective)
        interval = Interval(100.0 * p, 100.0 * low, 100.0 * high)
    else:
        interval = Interval(quantile(values, weight, measure.q), *quantile_interval(values, weight, measure.q))
    return Figure(interval, len(values), effective)


def _number(column: str) -> Callable[[DataFrame], Any]:
    return lambda calls: calls[column].to_numpy(np.float64, na_value=np.nan)


def _above(column: str, limit: float) -> Callable[[DataFrame], Any]:
    return lambda calls: _flagged(_number(column)(calls), lambda values: values > limit)


def _below(limit: float) -> Callable[[DataFrame], Any]:
    return lambda calls: _flagged(_number("r_factor")(calls), lambda values: values < limit)


def _flagged(values: NDArray[np.float64], flag: Callable[[Any], Any]) -> NDArray[np.float64]:
    return np.where(np.isnan(values), np.nan, flag(values).astype(np.float64))


def attempts(calls: DataFrame) -> NDArray[np.bool_]:
    """Calls that signalling asked for, which are those that may fail."""
    signalled = ~calls["outcome"].isin(["media only"]) & calls["outcome"].notna()
    return np.asarray(signalled, np.bool_)


def _of_attempts(calls: DataFrame, flags: Any) -> NDArray[np.float64]:
    return np.where(attempts(calls), np.asarray(flags, np.float64), np.nan)


def _failed(calls: DataFrame) -> NDArray[np.float64]:
    users = calls["status_code"].isin(USERS_DOING).to_numpy(bool)
    return _of_attempts(calls, calls["outcome"].isin(FAILED_OUTCOMES).to_numpy(bool) & ~users)


def _established(calls: DataFrame) -> NDArray[np.float64]:
    return _of_attempts(calls, (calls["outcome"] == "answered").fillna(False).to_numpy(bool))


def _effective(calls: DataFrame) -> NDArray[np.float64]:
    answered = (calls["outcome"] == "answered").fillna(False).to_numpy(bool)
    return _of_attempts(calls, answered | calls["status_code"].isin(USERS_DOING).to_numpy(bool))


def _ineffective(calls: DataFrame) -> NDArray[np.float64]:
    return _of_attempts(calls, calls["status_code"].isin(INEFFECTIVE).to_numpy(bool))


def _found(kind: str) -> Callable[[DataFrame], Any]:
    return lambda calls: calls[f"has {kind}"].to_numpy(np.float64)


def finding_measure(kind: str) -> Measure:
    """Share of calls with a finding of one kind; the calls have a column of that name."""
    return Measure(f"finding {kind}", f"with {kind}", "%", "more", _found(kind))


MEASURES = (
    Measure("below_medium_pct", "rated below medium (R 70)", "%", "more", _below(BANDS["medium"])),
    Measure("r_median", "median R", "", "less", _number("r_factor"), 0.5),
    Measure("r_p5", "R that 95 % of calls reach", "", "less", _number("r_factor"), NEAR_WORST),
    Measure("loss_over_1_pct", "lost more than 1 %", "%", "more", _above("loss_pct", LOSS_LIMIT_PCT)),
    Measure("discard_over_1_pct", "discarded more than 1 %", "%", "more", _above("discard_pct", LOSS_LIMIT_PCT)),
    Measure("setup_median_s", "median set-up delay", "s", "more", _number("setup_delay_s"), 0.5),
    Measure("failed_pct", "failed", "%", "more", _failed),
)
"""What is compared from night to night, besides the findings."""

BAND_MEASURES = tuple(
    Measure(f"below_{name}_pct", f"rated below {name} (R {limit:.0f})", "%", "more", _below(limit))
    for name, limit in BANDS.items()
)
RATIOS = (
    Measure("ser_pct", "session establishment ratio", "%", "less", _established),
    Measure("seer_pct", "session establishment effectiveness ratio", "%", "less", _effective),
    Measure("isa_pct", "ineffective session attempts", "%", "more", _ineffective),
)
"""RFC 6076, 4.6 to 4.8."""
TAILS = (
    Measure("loss_median_pct", "median loss", "%", "more", _number("loss_pct"), 0.5),
    Measure("loss_p95_pct", "loss that 95 % of calls stay at or below", "%", "more", _number("loss_pct"), NEAR_BEST),
    Measure("discard_p95_pct", "discards, likewise", "%", "more", _number("discard_pct"), NEAR_BEST),
    Measure("setup_p95_s", "set-up delay, likewise", "s", "more", _number("setup_delay_s"), NEAR_BEST),
)
ONE_WAY = finding_measure("one-way-media")
