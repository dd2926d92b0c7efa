"""The morning page: breaches first, then what changed, the worst calls, every comparison, and trend lines."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime, timedelta
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any

from rtpaudit import __version__
from rtpaudit.nightly.compare import BASELINE_NIGHTS, Change
from rtpaudit.nightly.groups import ALL, CODEC, DIMENSIONS, ENDPOINT, HOUR, ROUTE, Group, by_dimension
from rtpaudit.nightly.intervals import FEW_CALLS
from rtpaudit.nightly.journal import FAILED
from rtpaudit.nightly.lines import Line, trend_line
from rtpaudit.nightly.measures import BAND_MEASURES, MEASURES, RATIOS, TAILS, Figure, Measure, finding_measure
from rtpaudit.nightly.morning import Morning
from rtpaudit.nightly.store import Store
from rtpaudit.nightly.traffic import BLOCKING
from rtpaudit.report.folder import CAUTION
from rtpaudit.report.shell import stylesheet

if TYPE_CHECKING:
    from jinja2 import Environment

LISTED_FAILURES = 50
HEADINGS = {ROUTE: "By route", CODEC: "By codec", HOUR: "By hour", ENDPOINT: "By endpoint"}


def page(store: Store, morning: Morning) -> str:
    """The page of a night as a file that needs nothing beside it."""
    from markupsafe import Markup

    nights = store.nights()
    place = nights.index(morning.night.night)
    return (
        _environment()
        .get_template("night.html")
        .render(
            stylesheet=Markup(stylesheet() + _own("night.css")),
            night=morning.night.night.isoformat(),
            day_after=(morning.night.night + timedelta(days=1)).isoformat(),
            earlier=nights[place - 1].isoformat() if place else "",
            later=nights[place + 1].isoformat() if place + 1 < len(nights) else "",
            zone=_zone(morning),
            version=__version__,
            caution=CAUTION,
            limits=_limits(morning),
            changes=_changes(morning),
            compared=len(morning.before[-BASELINE_NIGHTS:]),
            worst=_worst(morning),
            tables=[_table(morning, dimension) for dimension in (ROUTE, CODEC, HOUR, ENDPOINT)],
            findings=_findings(morning),
            whole=_whole(morning),
            traffic=_traffic(morning),
            failures=_failures(morning),
            trends=_trends(morning),
            few=FEW_CALLS,
            **_head(morning),
        )
    )


def _head(morning: Morning) -> dict[str, Any]:
    night = morning.night
    failed = int((night.captures["status"] == FAILED).sum())
    sample = ""
    if night.sampled:
        drawn = f"{len(night.captures):,} of {night.population:,} captures"
        sample = f"A sample: {drawn} were audited. Figures stand for all."
    return {
        "captures": f"{len(night.captures):,}",
        "calls": f"{len(night.calls):,}",
        "failed": failed,
        "sample": sample,
        "sampled": night.sampled,
        "sentence": sentence(morning),
    }


def sentence(morning: Morning) -> str:
    """The night in one sentence."""
    if not len(morning.night.calls):
        return "No call was found in this night."
    broken, changed = len(morning.broken), morning.spoken_of
    worse = sum(one.worse for one in changed)
    said = []
    if morning.verdicts:
        verb = "is" if broken == 1 else "are"
        said.append(f"{_many(broken, 'limit')} {verb} broken" if broken else "No limit is broken")
    if worse:
        said.append(f"{_many(worse, 'figure')} moved to the worse beyond what nights differ by")
    elif changed:
        said.append(f"{_many(len(changed), 'figure')} moved to the better beyond what nights differ by")
    elif any(one.p == one.p for one in morning.changes):
        said.append("nothing changed beyond what nights differ by")
    else:
        said.append("there are too few nights or calls to tell changes from chance")
    text = "; ".join(said)
    return f"{text[0].upper()}{text[1:]}."


def _limits(morning: Morning) -> list[dict[str, Any]]:
    return [
        {"sentence": one.sentence, "broken": one.broken, "passed_over": bool(one.passed_over)}
        for one in morning.verdicts
    ]


def _changes(morning: Morning) -> list[dict[str, Any]]:
    """Changes beyond noise: what got worse first, then all calls, routes, codecs, hours, endpoints."""
    ordered = sorted(
        morning.spoken_of, key=lambda one: (not one.worse, DIMENSIONS.index(one.group.dimension), one.group.name)
    )
    return [_change(morning, one) for one in ordered]


def _change(morning: Morning, one: Change) -> dict[str, Any]:
    apart = morning.intervals[one.group, one.measure.name]
    return {
        "group": _group(one.group),
        "label": one.measure.label,
        "before": _number(one.before, one.measure.unit),
        "tonight": _number(one.tonight.interval.value, one.measure.unit),
        "apart": f"{apart.value:+.3g} ({apart.low:+.3g} to {apart.high:+.3g})",
        "worse": one.worse,
        "nights": one.nights,
        "count": one.tonight.count,
        "since": _since(one),
    }


def _since(one: Change) -> str:
    if one.step is None:
        return "this night only, so far"
    return f"since {one.step.isoformat()}: {one.step_before:.3g}, then {one.step_after:.3g}"


def _group(group: Group) -> str:
    return "all calls" if group.dimension == ALL else f"{group.dimension} {group.name}"


def _worst(morning: Morning) -> list[dict[str, Any]]:
    return [
        {
            "time": _local(morning, row.started),
            "parties": f"{_text(row.caller, 'unknown')} → {_text(row.callee, 'unknown')}",
            "route": _text(row.route, ""),
            "encoding": _text(row.encoding, ""),
            "rating": _number(row.r_factor, ""),
            "band": _text(row.quality_band, "not rated"),
            "loss": _number(row.loss_pct, "%"),
            "headline": _text(row.headline, ""),
            "capture": _text(row.capture, ""),
            "link": f"{row.report}/index.html" if there else "",
        }
        for row, there in zip(morning.worst.itertuples(), morning.reports, strict=True)
    ]


def _table(morning: Morning, dimension: str) -> dict[str, Any]:
    """All groups of a dimension by all measures; under each figure what it was before."""
    before = {(one.group, one.measure.name): one for one in morning.changes}
    groups = by_dimension(morning.summary)[dimension]
    rows = []
    for group in [Group(ALL, ALL), *groups]:
        cells = [_cell(morning, group, measure, before.get((group, measure.name))) for measure in MEASURES]
        count = morning.summary.calls.get(group, 0)
        rows.append({"name": "all" if group.dimension == ALL else group.name, "calls": f"{count:,}",
                     "few": count < FEW_CALLS, "cells": cells})  # fmt: skip
    return {
        "heading": HEADINGS[dimension],
        "column": dimension.capitalize(),
        "columns": [one.label for one in MEASURES],
        "rows": rows,
    }


def _cell(morning: Morning, group: Group, measure: Measure, change: Change | None) -> dict[str, str]:
    figure = morning.summary.figure(group, measure)
    if figure is None or not figure.count:
        return {"value": "–", "was": "", "span": ""}
    was = f"was {_number(change.before, measure.unit)}" if change and change.nights else ""
    return {"value": _number(figure.interval.value, measure.unit), "was": was, "span": _span(morning, figure)}


def _span(morning: Morning, figure: Figure) -> str:
    """The sampling interval, empty where all was audited."""
    if not morning.night.sampled:
        return ""
    interval = morning.shown(figure)
    return f"{interval.low:.3g} to {interval.high:.3g}"


def _findings(morning: Morning) -> list[dict[str, Any]]:
    """Kinds of findings by how many calls have them."""
    group = Group(ALL, ALL)
    before = {one.measure.name: one for one in morning.changes if one.group == group}
    rows = []
    for kind in morning.kinds:
        measure = finding_measure(kind)
        figure = morning.summary.figure(group, measure)
        if figure is not None and figure.interval.value > 0.0:
            rows.append(
                (figure.interval.value, {"kind": kind, **_cell(morning, group, measure, before.get(measure.name))})
            )
    return [row for _, row in sorted(rows, key=lambda pair: -pair[0])]


def _whole(morning: Morning) -> list[dict[str, str]]:
    """The figures of all calls that no table has: bands, ratios and tails."""
    group = Group(ALL, ALL)
    rows = [(one, _cell(morning, group, one, None)) for one in (*BAND_MEASURES, *RATIOS, *TAILS)]
    return [{"label": one.label, **cell} for one, cell in rows]


def _traffic(morning: Morning) -> dict[str, Any] | None:
    if morning.traffic is None:
        return None
    busy, channels = morning.traffic.busy, morning.traffic.channels
    return {
        "from": f"{_at(morning, busy.begin_ns):%H:%M}",
        "until": f"{_at(morning, busy.begin_ns + 3_600_000_000_000):%H:%M}",
        "erlangs": f"{busy.erlangs:.3g}",
        "calls": f"{busy.calls:,.0f}",
        "most": f"{busy.most_at_once:,.0f}",
        "most_at": f"{_at(morning, busy.most_at_once_ns):%H:%M:%S}",
        "channels": channels,
        "blocking": f"{100.0 * BLOCKING:g} %",
    }


def _failures(morning: Morning) -> dict[str, Any]:
    failed = morning.night.captures[morning.night.captures["status"] == FAILED]
    rows = [
        {"capture": _text(row.capture, "name removed"), "reason": _text(row.reason, "reason removed")}
        for row in failed.head(LISTED_FAILURES).itertuples()
    ]
    return {"rows": rows, "more": len(failed) - len(rows)}


def _trends(morning: Morning) -> list[dict[str, Any]]:
    """For all calls each measure, for each route the two that say most."""
    nights = [*(one.night for one in morning.before), morning.night.night]
    found = []
    for group in [Group(ALL, ALL), *by_dimension(morning.summary)[ROUTE]]:
        measures: Sequence[Measure] = MEASURES if group.dimension == ALL else MEASURES[:2]
        lines: list[Line] = []
        for measure in measures:
            figures = [one.figure(group, measure) for one in [*morning.before, morning.summary]]
            values = [one.interval.value if one else float("nan") for one in figures]
            line = trend_line(measure.label, measure.unit, nights, values)
            lines += [line] if line else []
        if lines:
            found.append({"group": _group(group), "lines": lines})
    return found


def _number(value: Any, unit: str) -> str:
    """A figure with its unit, a dash where there is none."""
    if not isinstance(value, int | float) or value != value:
        return "–"
    text = f"{value:.1f}" if not unit else f"{value:.3g}"
    return f"{text} {unit}".rstrip()


def _text(cell: Any, otherwise: str) -> str:
    return cell if isinstance(cell, str) and cell else otherwise


def _many(count: int, thing: str) -> str:
    return f"{count} {thing}" if count == 1 else f"{count} {thing}s"


def _at(morning: Morning, time_ns: int) -> datetime:
    return datetime.fromtimestamp(time_ns // 1_000_000_000).astimezone(morning.zone)


def _local(morning: Morning, time: Any) -> str:
    return f"{time.to_pydatetime(warn=False).astimezone(morning.zone):%Y-%m-%d %H:%M:%S}"


def _zone(morning: Morning) -> str:
    if morning.zone is not None:
        return str(morning.zone)
    noon = datetime.combine(morning.night.night, datetime.min.time()).astimezone()
    return noon.tzname() or "local time"


def _own(name: str) -> str:
    return (files("rtpaudit.nightly") / "templates" / name).read_text("utf-8")


@cache
def _environment() -> Environment:
    from jinja2 import Environment, FunctionLoader, StrictUndefined

    return Environment(
        loader=FunctionLoader(_own), autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
