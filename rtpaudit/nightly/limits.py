"""The user's limits: read from TOML, held against a night, and told as sentences, JUnit XML and OpenMetrics."""

import tomllib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from xml.sax.saxutils import quoteattr

from rtpaudit.errors import UnusableProfile
from rtpaudit.nightly.groups import ALL, ROUTE, Group, Summary
from rtpaudit.nightly.intervals import FEW_CALLS
from rtpaudit.nightly.measures import BAND_MEASURES, MEASURES, ONE_WAY, RATIOS, TAILS, Figure, Measure

LEAST_CALLS = "least_calls"
"""A limit on the number of calls themselves: a night without them is no good night."""

JUDGED_FROM = "judged_from_calls"
"""Groups with fewer calls are not judged."""

KNOWN: dict[str, Measure] = {one.name: one for one in (*MEASURES, *BAND_MEASURES, *RATIOS, *TAILS)}
KNOWN["one_way_pct"] = ONE_WAY
_SECTIONS = (ALL, "routes")


@dataclass(frozen=True, slots=True)
class Limit:
    """One limit on one group."""

    group: Group
    name: str
    limit: float

    @property
    def title(self) -> str:
        """How messages and files call it."""
        where = self.group.name if self.group.dimension == ALL else f"{self.group.dimension} {self.group.name}"
        return f"{where}: {self.name}"


@dataclass(frozen=True, slots=True)
class Verdict:
    """A limit held against a night."""

    limit: Limit
    broken: bool
    measured: float
    count: int
    """calls that the figure rests on"""
    passed_over: str = ""
    """why it was not judged"""
    interval: str = ""

    @property
    def sentence(self) -> str:
        """The limit by its name, the figure and the sample size."""
        if self.passed_over:
            return f"{self.limit.title} was not judged: {self.passed_over}"
        few = f", which is few, {self.interval} with 95 %" if self.count < FEW_CALLS and self.interval else ""
        calls = "call" if self.count == 1 else "calls"
        return (
            f"{self.limit.title} is {self.measured:.4g}, the limit is {self.limit.limit:g} ({self.count} {calls}{few})"
        )


@dataclass(frozen=True, slots=True)
class Limits:
    """All limits of a file."""

    limits: tuple[Limit, ...]
    judged_from: int = 1

    @classmethod
    def read(cls, path: str | Path) -> "Limits":
        """Limits of a TOML file; UnusableProfile says in one sentence what is wrong with it."""
        try:
            with open(path, "rb") as file:
                table = tomllib.load(file)
        except OSError as fault:
            raise UnusableProfile(f"{path}: cannot be read: {fault.strerror}") from fault
        except (ValueError, RecursionError) as fault:
            raise UnusableProfile(f"{path}: is not TOML: {fault}") from fault
        try:
            return cls.from_table(table)
        except UnusableProfile as fault:
            raise UnusableProfile(f"{path}: {fault}") from fault

    @classmethod
    def from_table(cls, table: Mapping[str, Any]) -> "Limits":
        """Limits from what a TOML file holds."""
        judged_from = table.get(JUDGED_FROM, 1)
        if isinstance(judged_from, bool) or not isinstance(judged_from, int) or judged_from < 1:
            raise UnusableProfile(f"{JUDGED_FROM} is {judged_from!r}, permitted are whole numbers from 1 on")
        for key in table:
            if key not in (*_SECTIONS, JUDGED_FROM):
                raise UnusableProfile(f"unknown key {key}, known are [all], [routes.NAME] and {JUDGED_FROM}")
        found = list(_limits(Group(ALL, ALL), ALL, table.get(ALL, {})))
        for name, part in _table("routes", table.get("routes", {})).items():
            found += _limits(Group(ROUTE, name), f"routes.{name}", part)
        if not found:
            raise UnusableProfile("holds no limit; write them under [all] or [routes.NAME]")
        return cls(tuple(found), judged_from)


def _table(key: str, value: Any) -> dict[str, Any]:
    if not isinstance(value, dict):
        raise UnusableProfile(f"{key} is {value!r}, it has to be a table: [{key}]")
    return value


def _limits(group: Group, key: str, table: Any) -> Iterable[Limit]:
    for name, value in _table(key, table).items():
        if name not in KNOWN and name != LEAST_CALLS:
            raise UnusableProfile(f"unknown limit {key}.{name}, known are {', '.join([*KNOWN, LEAST_CALLS])}")
        if isinstance(value, bool) or not isinstance(value, int | float) or value != value:
            raise UnusableProfile(f"{key}.{name} is {value!r}, which is no number")
        yield Limit(group, name, float(value))


def judge(limits: Limits, night: Summary) -> list[Verdict]:
    """Every limit held against a night, the broken ones first."""
    verdicts = [_judge(one, limits.judged_from, night) for one in limits.limits]
    return sorted(verdicts, key=lambda one: not one.broken)


def _judge(limit: Limit, judged_from: int, night: Summary) -> Verdict:
    calls = night.calls.get(limit.group, 0)
    if limit.name == LEAST_CALLS:
        return Verdict(limit, calls < limit.limit, float(calls), calls)
    measure = KNOWN[limit.name]
    figure = night.figure(limit.group, measure)
    if figure is None or figure.count < judged_from:
        count = figure.count if figure else 0
        none = "no call has a say" if not count else f"{count} calls have a say, {JUDGED_FROM} is {judged_from}"
        return Verdict(limit, False, float("nan"), count, passed_over=none)
    value = figure.interval.value
    broken = value > limit.limit if measure.worse == "more" else value < limit.limit
    return Verdict(limit, broken, value, figure.count, interval=_span(figure))


def _span(figure: Figure) -> str:
    return f"{figure.interval.low:.4g} to {figure.interval.high:.4g}"


def junit(verdicts: Sequence[Verdict], night: str) -> str:
    """The verdicts as JUnit XML: one test case a limit, a failure where it is broken."""
    broken, skipped = sum(one.broken for one in verdicts), sum(bool(one.passed_over) for one in verdicts)
    lines = [
        '<?xml version="1.0" encoding="UTF-8"?>',
        f'<testsuites name="rtpaudit nightly" tests="{len(verdicts)}" failures="{broken}">',
        f'<testsuite name={_quoted(f"night {night}")} tests="{len(verdicts)}" failures="{broken}" errors="0" '
        f'skipped="{skipped}">',
    ]
    for one in verdicts:
        where = one.limit.group.dimension if one.limit.group.dimension == ALL else f"route.{one.limit.group.name}"
        case = f"<testcase classname={_quoted(where)} name={_quoted(one.limit.name)}"
        if one.broken:
            lines.append(f"{case}><failure message={_quoted(one.sentence)}/></testcase>")
        elif one.passed_over:
            lines.append(f"{case}><skipped message={_quoted(one.passed_over)}/></testcase>")
        else:
            lines.append(f"{case}/>")
    return "\n".join([*lines, "</testsuite>", "</testsuites>", ""])


def _quoted(text: str) -> str:
    """An attribute of XML 1.0, which cannot hold control characters in any way of writing."""
    return quoteattr("".join(sign if sign.isprintable() else "\ufffd" for sign in text))


def openmetrics(night: Summary, verdicts: Sequence[Verdict], begin_s: int) -> str:
    """Figures of all calls and of each route, and the limits, in the text format of OpenMetrics 1.0."""
    groups = [group for group in night.figures if group.dimension in (ALL, ROUTE)]
    lines = ["# TYPE rtpaudit_night_begin_seconds gauge", "# UNIT rtpaudit_night_begin_seconds seconds"]
    lines += [f"rtpaudit_night_begin_seconds {begin_s}", "# TYPE rtpaudit_calls gauge"]
    lines += [f"rtpaudit_calls{_labels(group)} {night.calls[group]}" for group in groups]
    for name, measure in KNOWN.items():
        samples = [
            f"rtpaudit_{name}{_labels(group)} {figure.interval.value!r}"
            for group in groups
            if (figure := night.figure(group, measure)) and figure.count
        ]
        if samples:
            lines += [f"# TYPE rtpaudit_{name} gauge", f"# HELP rtpaudit_{name} {_escaped(measure.label)}", *samples]
    if verdicts:
        lines.append("# TYPE rtpaudit_limit_broken gauge")
        lines += [
            f"rtpaudit_limit_broken{_labels(one.limit.group, limit=one.limit.name)} {int(one.broken)}"
            for one in verdicts
            if not one.passed_over
        ]
    return "\n".join([*lines, "# EOF", ""])


def _labels(group: Group, **more: str) -> str:
    labels = {"route": group.name if group.dimension == ROUTE else ""} | more
    return "{" + ",".join(f'{name}="{_escaped(value)}"' for name, value in labels.items()) + "}"


def _escaped(text: str) -> str:
    return text.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n")
