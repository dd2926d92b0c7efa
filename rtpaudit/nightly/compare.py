"""Tonight against the nights before: for each group and measure the change, and whether it is one to speak of."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date, tzinfo

import numpy as np
from numpy.typing import NDArray

from rtpaudit.nightly import trends
from rtpaudit.nightly.bootstrap import difference, replicates
from rtpaudit.nightly.groups import ALL, CODEC, ENDPOINT, HOUR, ROUTE, Group, Summary, members, with_findings
from rtpaudit.nightly.intervals import FEW_CALLS, Z_95, Interval
from rtpaudit.nightly.measures import Figure, Measure
from rtpaudit.nightly.reading import Night

BASELINE_NIGHTS, TREND_NIGHTS = 28, 90
"""Nights that tonight is compared with, and nights in which steps are sought."""

ALPHA = 0.002
"""Chance of any false alarm in a night, for tonight's changes, and again for steps: less than two a year in all."""

# How that chance is shared among the dimensions: what concerns everybody may speak up first.
SHARES = {ALL: 0.4, ROUTE: 0.3, CODEC: 0.1, HOUR: 0.1, ENDPOINT: 0.1}
SEED = 6076


@dataclass(frozen=True, slots=True)
class Change:
    """One measure of one group, tonight and before."""

    group: Group
    measure: Measure
    tonight: Figure
    before: float
    """mean of the nights before; NaN where there are none"""
    nights: int
    """that it is the mean of"""
    p: float
    """NaN where there are too few nights or calls to ask"""
    alarm: bool
    """tonight differs beyond what nights differ"""
    step: date | None
    """the series has another level from this night on"""
    step_is_new: bool
    """which yesterday's series did not show yet"""
    step_before: float
    step_after: float

    @property
    def few(self) -> bool:
        """Whether it rests on few calls."""
        return self.tonight.effective < FEW_CALLS

    @property
    def worse(self) -> bool:
        """Whether it moved to the worse."""
        more = self.tonight.interval.value > self.before
        return more if self.measure.worse == "more" else not more


def compare(
    tonight: Summary, before: Sequence[Summary], measures: Sequence[Measure], alpha: float = ALPHA
) -> list[Change]:
    """All changes of a night; ``before`` in order of time, the latest night last."""
    judged = [
        _judge(group, measure, figure, tonight.night, before)
        for group, figures in tonight.figures.items()
        for measure in measures
        if (figure := figures[measure.name]).count
    ]
    stands = _standing({k: (one.group, one.p) for k, one in enumerate(judged)}, alpha)
    asked = {dimension: sum(one.group.dimension == dimension and one.asked for one in judged) for dimension in SHARES}
    return [
        one.change(stands[k], alpha * SHARES[one.group.dimension] / max(asked[one.group.dimension], 1))
        for k, one in enumerate(judged)
    ]


def _standing(tests: Mapping[int, tuple[Group, float]], alpha: float) -> dict[int, bool]:
    stands = dict.fromkeys(tests, False)
    for dimension, part in SHARES.items():
        places = [k for k, (group, p) in tests.items() if group.dimension == dimension and p == p]
        stands |= dict(zip(places, trends.holm([tests[k][1] for k in places], alpha * part), strict=True))
    return stands


@dataclass(slots=True)
class _Judged:
    group: Group
    measure: Measure
    tonight: Figure
    nights: list[date]
    """with calls that have a say, tonight last"""
    values: NDArray[np.float64]
    """as told"""
    steady: NDArray[np.float64]
    """on the scale on which they are judged"""
    spread: NDArray[np.float64]
    p: float

    @property
    def asked(self) -> bool:
        return len(self.nights) > trends.LEAST_NIGHTS and self.tonight.effective >= FEW_CALLS

    def change(self, alarm: bool, alpha: float) -> Change:
        """With the last step of the series, sought at ``alpha``."""
        found = trends.steps(self.steady, self.spread, alpha) if self.asked else []
        earlier = trends.steps(self.steady[:-1], self.spread[:-1], alpha) if found else []
        last = found[-1] if found else None
        new = last is not None and all(abs(one.place - last.place) > trends.LEAST_SIDE for one in earlier)
        begin = found[-2].place if len(found) > 1 else 0
        baseline = self.values[:-1][-BASELINE_NIGHTS:]
        return Change(
            group=self.group,
            measure=self.measure,
            tonight=self.tonight,
            before=float(baseline.mean()) if len(baseline) else float("nan"),
            nights=len(baseline),
            p=self.p,
            alarm=alarm,
            step=self.nights[last.place] if last else None,
            step_is_new=new,
            step_before=float(self.values[begin : last.place].mean()) if last else float("nan"),
            step_after=float(self.values[last.place :].mean()) if last else float("nan"),
        )


def _judge(group: Group, measure: Measure, tonight: Figure, night: date, before: Sequence[Summary]) -> _Judged:
    found = [(one.night, figure) for one in before if (figure := one.figure(group, measure)) and figure.count]
    nights, figures = [*(each for each, _ in found), night], [*(figure for _, figure in found), tonight]
    values = np.array([one.interval.value for one in figures])
    count = np.array([one.effective for one in figures])
    if measure.q is None:
        steady = trends.steadied_share(values / 100.0, count)
        spread = 0.5 / np.sqrt(count + 0.5)
    else:
        low, high = (np.array([getattr(one.interval, end) for one in figures]) for end in ("low", "high"))
        steady = values
        if measure.unit == "s":
            # Delays multiply rather than add up.
            steady, low, high = (np.log(np.maximum(one, 1e-3)) for one in (values, low, high))
        spread = (high - low) / (2.0 * Z_95)
    judged = _Judged(group, measure, tonight, nights, values, steady, spread, float("nan"))
    if judged.asked:
        judged.p = _p(judged, count)
    return judged


def _p(judged: _Judged, count: NDArray[np.float64]) -> float:
    baseline = slice(max(len(judged.steady) - 1 - BASELINE_NIGHTS, 0), -1)
    p = trends.prediction_p(float(judged.steady[-1]), judged.steady[baseline], float(judged.spread[-1]))
    if judged.measure.q is None and p < ALPHA:
        # Both have to say so: the one knows how nights differ, the other how few cases they are.
        hits = judged.values / 100.0 * count
        exact = trends.exact_p(
            float(hits[-1]), float(count[-1]), float(hits[baseline].sum()), float(count[baseline].sum())
        )
        p = max(p, exact)
    return p


def interval_of(
    change: Change, night: Night, before: Sequence[Summary], kinds: Sequence[str], zone: tzinfo | None
) -> Interval:
    """By how much tonight differs from the nights before, with its bootstrap interval; NaN where none are."""
    figures = [figure for one in before if (figure := one.figure(change.group, change.measure)) and figure.count]
    earlier = np.array([one.interval.value for one in figures[-BASELINE_NIGHTS:]])
    rows = members(night, zone).get(change.group, np.empty(0, np.int64))
    calls = with_findings(night, kinds).iloc[rows]
    values = change.measure.values(calls)
    there = ~np.isnan(values)
    if not len(earlier) or not there.any():
        return Interval(float("nan"), float("nan"), float("nan"))
    weight = calls["weight"].to_numpy(np.float64)[there]
    _, cluster = np.unique(calls["capture_id"].to_numpy(object).astype(str)[there], return_inverse=True)
    draw = np.random.default_rng(SEED)
    tonight = replicates(values[there], weight, cluster, change.measure.q, draw)
    return difference(tonight, earlier, change.tonight.interval.value, draw)
