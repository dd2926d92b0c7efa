"""Nights by the hundred without captures: calls drawn from what a network does, and their figures."""

from collections.abc import Sequence
from datetime import date, timedelta

import numpy as np

from rtpaudit.nightly.groups import ALL, CODEC, ROUTE, Group, Summary
from rtpaudit.nightly.measures import MEASURES, Measure, figure, finding_measure

FIRST = date(2026, 1, 1)
MEASURED = (*MEASURES, finding_measure("one-way-media"), finding_measure("loss-burst"))


def night(
    number: int,
    draw: np.random.Generator,
    calls: int = 300,
    routes: int = 3,
    codecs: int = 2,
    restless: float = 1.0,
    worse_by_r: float = 0.0,
    measures: Sequence[Measure] = MEASURED,
) -> Summary:
    """One night. Nights differ by chance of their own, as loads do; ``restless`` scales by how much."""
    mood = draw.normal(0.0, restless)
    rating = 88.0 + mood - worse_by_r - draw.gamma(0.6, 6.0, calls)
    loss = draw.lognormal(-2.5 + 0.2 * draw.normal(0.0, restless), 1.2, calls)
    values = {
        "below_medium_pct": (rating < 70.0).astype(float),
        "r_median": rating,
        "r_p5": rating,
        "loss_over_1_pct": (loss > 1.0).astype(float),
        "discard_over_1_pct": (draw.random(calls) < 0.01).astype(float),
        "setup_median_s": draw.lognormal(0.0 + 0.05 * draw.normal(0.0, restless), 0.5, calls),
        "failed_pct": (draw.random(calls) < 0.02 * np.exp(0.2 * draw.normal(0.0, restless))).astype(float),
        "finding one-way-media": (draw.random(calls) < 0.003).astype(float),
        "finding loss-burst": (draw.random(calls) < 0.05).astype(float),
    }
    route, codec = draw.integers(0, routes, calls), draw.integers(0, codecs, calls)
    groups = {Group(ALL, ALL): np.arange(calls)}
    groups |= {Group(ROUTE, f"route {k}"): np.flatnonzero(route == k) for k in range(routes)}
    groups |= {Group(CODEC, f"codec {k}"): np.flatnonzero(codec == k) for k in range(codecs)}
    figures = {
        group: {one.name: figure(one, values[one.name][rows], np.ones(len(rows))) for one in measures}
        for group, rows in groups.items()
    }
    return Summary(FIRST + timedelta(days=number), {group: len(rows) for group, rows in groups.items()}, figures)
