"""Limits: read, held against a night, and told as JUnit XML and OpenMetrics."""

import re
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import numpy as np
import pytest

from rtpaudit.errors import UnusableProfile
from rtpaudit.nightly.groups import ROUTE, Group
from rtpaudit.nightly.limits import Limits, judge, junit, openmetrics
from rtpaudit.nightly.measures import BAND_MEASURES, RATIOS, TAILS
from tests.nightly.years import MEASURED, night

NIGHT = night(0, np.random.default_rng(1), measures=MEASURED)
NASTY = Group(ROUTE, 'north "<&\x1b\n')


def verdicts(**table: Any) -> list:
    return judge(Limits.from_table(table), NIGHT)


def test_a_limit_is_broken_on_its_bad_side() -> None:
    median = NIGHT.figure(Group("all", "all"), MEASURED[1]).interval.value  # type: ignore[union-attr]
    found = {(one.limit.name, one.limit.limit): one.broken
             for table in ({"r_median": median + 1, "r_p5": 99}, {"r_median": median - 1, "failed_pct": 100})
             for one in verdicts(all=table)}  # fmt: skip
    assert list(found.values()) == [True, True, False, False]


def test_a_broken_limit_is_told_with_figure_and_sample_size() -> None:
    (one,) = verdicts(routes={"route 1": {"r_median": 99.0}})
    count = NIGHT.calls[Group(ROUTE, "route 1")]
    assert re.fullmatch(rf"route route 1: r_median is \d\d\.\d+, the limit is 99 \({count} calls\)", one.sentence)


def test_a_night_with_too_few_calls_breaks_the_limit_on_calls() -> None:
    assert [one.broken for one in verdicts(all={"least_calls": 301})] == [True]
    assert [one.broken for one in verdicts(all={"least_calls": 300})] == [False]


def test_a_small_group_is_not_judged_and_says_so() -> None:
    (one,) = verdicts(all={"r_median": 99.0}, judged_from_calls=301)
    assert not one.broken
    assert "300 calls have a say" in one.sentence
    (one,) = verdicts(routes={"unheard of": {"r_median": 99.0}})
    assert "no call has a say" in one.sentence


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "holds no limit"),
        ("[all]\nr_medium = 3", "unknown limit all.r_medium, known are"),
        ("[al]\nr_median = 3", "unknown key al"),
        ('[all]\nr_median = "high"', "all.r_median is 'high', which is no number"),
        ("[all]\nr_median = true", "which is no number"),
        ("[all]\nr_median = nan", "which is no number"),
        ("all = 3", "it has to be a table"),
        ("judged_from_calls = 0\n[all]\nr_median = 3", "whole numbers from 1 on"),
        ("[all", "is not TOML"),
    ],
)
def test_limits_that_cannot_be_meant_are_refused_with_file_and_key(tmp_path: Path, text: str, said: str) -> None:
    path = tmp_path / "limits.toml"
    path.write_text(text)
    with pytest.raises(UnusableProfile, match=r"limits\.toml") as refused:
        Limits.read(path)
    assert said in str(refused.value)


def test_limits_that_are_not_there_are_told(tmp_path: Path) -> None:
    with pytest.raises(UnusableProfile, match="cannot be read"):
        Limits.read(tmp_path / "missing.toml")


def test_junit_has_a_case_for_each_limit_and_a_failure_for_each_broken_one() -> None:
    found = verdicts(all={"r_median": 99.0, "r_p5": 1.0}, routes={"a": {"r_median": 1.0}})
    root = ElementTree.fromstring(junit(found, "2026-03-01"))
    (suite,) = root
    assert (root.tag, suite.tag) == ("testsuites", "testsuite")
    assert [suite.get(name) for name in ("tests", "failures", "errors", "skipped")] == ["3", "1", "0", "1"]
    cases = {(case.get("classname"), case.get("name")): [one.tag for one in case] for case in suite}
    assert cases == {("all", "r_median"): ["failure"], ("all", "r_p5"): [], ("route.a", "r_median"): ["skipped"]}
    assert "the limit is 99" in suite[0][0].get("message", "")


def test_a_nasty_name_stays_a_name() -> None:
    summary = night(0, np.random.default_rng(1))
    summary.figures[NASTY], summary.calls[NASTY] = summary.figures[Group(ROUTE, "route 0")], 7
    found = judge(Limits.from_table({"routes": {NASTY.name: {"r_median": 99.0}}}), summary)
    (case,) = ElementTree.fromstring(junit(found, "2026-03-01"))[0]
    assert case.get("classname") == 'route.north "<&\ufffd\ufffd'
    text = openmetrics(summary, found, 0)
    assert 'route="north \\"<&\x1b\\n"' in text
    check_exposition(text)


def test_figures_for_collectors_follow_the_format() -> None:
    text = openmetrics(NIGHT, verdicts(all={"r_median": 99.0}), 1_772_366_400)
    check_exposition(text)
    assert 'rtpaudit_calls{route=""} 300\n' in text
    assert "rtpaudit_night_begin_seconds 1772366400\n" in text
    assert 'rtpaudit_limit_broken{route="",limit="r_median"} 1\n' in text


def check_exposition(text: str) -> None:
    """OpenMetrics 1.0, exposition format (from memory): metadata first, families apart, # EOF last."""
    assert text.endswith("# EOF\n")
    family, seen = "", set()
    for line in text.split("\n")[:-2]:
        metadata = re.fullmatch(r"# (TYPE|HELP|UNIT) ([a-z0-9_]+) .+", line)
        if metadata:
            assert metadata[2] == family or metadata[2] not in seen
            family = metadata[2]
            seen.add(family)
        else:
            label = r'[a-z]+="(?:[^"\\\n]|\\["\\n])*"'
            sample = re.fullmatch(rf"([a-z0-9_]+)(\{{{label}(,{label})*\}})? -?[0-9.e+-]+", line)
            assert sample, line
            assert sample[1] == family


def test_every_measure_has_a_name_of_its_own() -> None:
    names = [
        one.name for one in (*MEASURED, *(one for one in BAND_MEASURES if "medium" not in one.name), *RATIOS, *TAILS)
    ]
    assert len(names) == len(set(names))
