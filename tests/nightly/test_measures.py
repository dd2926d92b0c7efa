"""Measures of groups, each counted by hand."""

from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd
import pytest

from rtpaudit.errors import UnusableArguments
from rtpaudit.nightly.groups import ALL, CODEC, ENDPOINT, HOUR, ROUTE, Group, members, summarise
from rtpaudit.nightly.measures import MEASURES, RATIOS, Measure, attempts, figure
from rtpaudit.nightly.worst import parse_audio, worst_calls
from tests.nightly.nights import START, night
from tests.nightly.runs import UTC

EVERYBODY = Group(ALL, ALL)


def value(calls: list[dict[str, Any]], name: str, **more: Any) -> float:
    made = summarise(night(calls, **more), ["one-way-media"], UTC, everything=True)
    return made.figures[EVERYBODY][name].interval.value


def outcomes(*pairs: tuple[str, int | None]) -> list[dict[str, Any]]:
    return [{"outcome": outcome, "status_code": status} for outcome, status in pairs]


ATTEMPTS = outcomes(
    ("answered", 200), ("answered", 200), ("refused", 486), ("refused", 603), ("failed", 480), ("failed", 503),
    ("failed", 404), ("cancelled", 487), ("no reply", None), ("failed", 408), ("media only", None),
)  # fmt: skip


@pytest.mark.parametrize(
    ("name", "hits"),
    [("ser_pct", 2), ("seer_pct", 5), ("isa_pct", 2), ("failed_pct", 4)],
)
def test_ratios_of_attempts_are_those_of_rfc_6076(name: str, hits: int) -> None:
    """Sections 4.6 to 4.8. Ten attempts; the call without signalling is none. Failed: 503, 404, no reply and 408."""
    assert value(ATTEMPTS, name) == pytest.approx(100.0 * hits / 10)


def test_calls_without_signalling_are_no_attempts() -> None:
    made = night(outcomes(("media only", None)))
    assert attempts(made.calls).tolist() == [False]
    assert summarise(made, [], UTC).figures[EVERYBODY]["failed_pct"].count == 0


@pytest.mark.parametrize(("band", "below"), [("best", 5), ("high", 4), ("medium", 3), ("low", 2), ("poor", 1)])
def test_a_call_is_below_a_band_when_its_rating_is_below_where_the_band_begins(band: str, below: int) -> None:
    """ITU-T G.109: the bands begin at 90, 80, 70, 60 and 50, which belong to them; a call without rating has no say."""
    ratings = [95.0, 90.0, 89.9, 79.9, 69.9, 59.9, 49.9, float("nan")]
    assert value([{"r_factor": one} for one in ratings], f"below_{band}_pct") == pytest.approx(100.0 * below / 7)


def test_quantiles_are_calls_that_there_are() -> None:
    ratings = [{"r_factor": float(one)} for one in range(1, 41)]
    assert (value(ratings, "r_median"), value(ratings, "r_p5")) == (20.0, 2.0)


def test_just_one_percent_lost_is_not_over_one() -> None:
    assert value([{"loss_pct": 1.0}, {"loss_pct": 1.01}], "loss_over_1_pct") == 50.0


def test_a_finding_counts_once_a_call() -> None:
    found = [{"call": "c01", "finding": "one-way-media"}, {"call": "c02", "finding": "duplicates"}]
    assert value([{}, {}, {}, {}], "finding one-way-media", findings=found) == 25.0


def test_a_figure_of_nothing_is_none() -> None:
    for measure in (*MEASURES, *RATIOS):
        made = figure(measure, np.array([np.nan]), np.ones(1))
        assert made.count == 0
        assert np.isnan(made.interval.value)


def groups_of(made: Any, zone: Any = UTC) -> dict[tuple[str, str], list[int]]:
    return {(group.dimension, group.name): rows.tolist() for group, rows in members(made, zone).items()}


def test_calls_are_grouped_by_route_codec_hour_and_endpoint() -> None:
    made = night(
        [{"route": "north"}, {"encoding": "G722", "started": START + pd.Timedelta(hours=5)}],
        streams=[
            {"call": "c01", "source": "192.0.2.1", "destination": "192.0.2.2"},
            {"call": "c01", "source": "192.0.2.2", "destination": "192.0.2.1"},
            {"call": "c02", "source": "192.0.2.1", "destination": "192.0.2.3"},
            {"call": None, "source": "192.0.2.9", "destination": "192.0.2.9"},
        ],
    )
    assert groups_of(made) == {
        (ALL, ALL): [0, 1],
        (ROUTE, "north"): [0], (ROUTE, "no route"): [1],
        (CODEC, "PCMU"): [0], (CODEC, "G722"): [1],
        (HOUR, "20 h"): [0], (HOUR, "01 h"): [1],
        (ENDPOINT, "192.0.2.1"): [0, 1], (ENDPOINT, "192.0.2.2"): [0], (ENDPOINT, "192.0.2.3"): [1],
    }  # fmt: skip
    assert (HOUR, "21 h") in groups_of(made, ZoneInfo("Europe/Vienna"))


def test_names_without_end_make_no_groups_without_end() -> None:
    made = night([{"encoding": f"x-{k}"} for k in range(200)])
    assert sum(group[0] == CODEC for group in groups_of(made)) == 40


def test_an_empty_night_has_figures_of_nothing() -> None:
    made = summarise(night([]), [], UTC, everything=True)
    assert {group.dimension for group in made.figures} == {ALL}
    assert all(one.count == 0 for one in made.figures[EVERYBODY].values())


def test_the_worst_calls_are_those_rated_least_and_faults_to_which_ratings_are_blind() -> None:
    made = night(
        [{"r_factor": 70.0}, {"r_factor": 40.0}, {"r_factor": 93.0}, {"r_factor": float("nan"), "loss_pct": 20.0},
         {"r_factor": float("nan")}],
        findings=[{"call": "c03", "finding": "one-way-media"}],
    )  # fmt: skip
    assert worst_calls(made, 10)["call"].tolist() == ["c02", "c03", "c01", "c04"]
    assert worst_calls(made, 1)["report"].tolist() == ["calls/aa-c02"]


@pytest.mark.parametrize("text", ["", "worst", "worst:", "worst:0", "worst:-1", "best:3", "worst:3x"])
def test_sound_of_no_calls_is_refused(text: str) -> None:
    with pytest.raises(UnusableArguments, match="worst:20"):
        parse_audio(text)


def test_measures_say_which_way_is_worse() -> None:
    less = {one.name for one in (*MEASURES, *RATIOS) if one.worse == "less"}
    assert less == {"r_median", "r_p5", "ser_pct", "seer_pct"}
    assert isinstance(MEASURES[0], Measure)
