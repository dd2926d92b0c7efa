"""The summary of a triage: which call is bad, which way and how bad, then what was written where."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from datetime import datetime, tzinfo
from pathlib import Path
from textwrap import fill
from typing import TYPE_CHECKING, Any

from rtpaudit import __version__
from rtpaudit.assess.results import AssessedStream, Assessment
from rtpaudit.cli.terminal import bold, visible
from rtpaudit.emodel.g109 import quality_band
from rtpaudit.report.folder import CAUTION, Written
from rtpaudit.report.rows import json_lines

if TYPE_CHECKING:
    from pandas import DataFrame, Series, Timestamp

LISTED_CALLS, LISTED_DAMAGE, LISTED_CAPTURES = 5, 3, 3
INDENT = " " * 5
SCHEMA_VERSION = 1
# The long form stands in audit.json.
MIND = (
    "Mind consent, interception law and retention: local rules decide. Captured sound can be loud without warning: "
    "start quietly."
)


def as_text(
    written: Written, assessment: Assessment, passed_on: Sequence[Path], zone: tzinfo | None, columns: int
) -> str:
    """The summary for people, at most ``columns`` wide where words allow."""
    findings = written.tables["findings"]
    calls = worst_first(written.tables["calls"], findings)
    streams = written.tables["streams"].set_index("stream")
    sides = {one.id: (one.from_callee, one.from_caller) for one in assessment.calls}
    blocks = [
        _call(call, findings[findings.call == call.call], sides[call.call], streams, zone, columns)
        for _, call in calls[:LISTED_CALLS].iterrows()
    ]
    notes = [
        *_rest(calls[LISTED_CALLS:]),
        *_notes(written, streams),
        *_meaning(calls),
        _place(written),
        *_excerpt(passed_on),
        MIND,
    ]
    heading = _heading(written, assessment.calls_in_all, zone)
    opening, closing = ("\n".join(fill(one, columns) for one in part) for part in (heading, notes))
    return "\n\n".join([opening, *blocks, closing])


def as_json(
    written: Written, calls_in_all: int, passed_on: Sequence[Path], limit: float | None, broken: Mapping[str, float]
) -> str:
    """The summary for programs: one object, calls with the worst first."""
    tables = written.tables
    head = {
        "schema": "rtpaudit summary",
        "schema_version": SCHEMA_VERSION,
        "rtpaudit": __version__,
        "folder": str(written.folder),
        "excerpt": [str(path) for path in passed_on],
        "captures": written.captures,
        "calls_in_all": calls_in_all,
        "streams": len(tables["streams"]),
        "packets": int(tables["streams"].packets_captured.sum()),
        "audio_files": written.audio_files,
        "fail_below": limit,
        "below": list(broken),
        "cautions": written.cautions,
    }
    listed = worst_first(tables["calls"], tables["findings"])
    for name, frame in (("calls", listed), ("findings", tables["findings"]), ("damage", tables["damage"])):
        head[name] = json.loads(b"[" + b"".join(json_lines(name, frame)) + b"]")
    return json.dumps(head, indent=1, allow_nan=False)


def worst_first(calls: DataFrame, findings: DataFrame) -> DataFrame:
    """Calls with faults first, then those with concerns; among them by the worse rating, then by loss."""
    told = findings[findings.call.notna()]
    gravity = told.severity.map({"remark": 0, "concern": 1, "fault": 2}).groupby(told.call).max()
    ranked = calls.assign(_gravity=calls.call.map(gravity).fillna(0).astype(int))
    order = ["_gravity", "r_factor", "loss_pct"]
    ranked = ranked.sort_values(order, ascending=[False, True, False], kind="stable", na_position="last")
    return ranked.drop(columns="_gravity")


def figure(value: float) -> str:
    """A figure with three significant digits, and no power of ten."""
    return f"{value:,.0f}" if abs(value) >= 100 else f"{value:.3g}"


def _heading(written: Written, calls_in_all: int, zone: tzinfo | None) -> list[str]:
    names = visible(", ".join(written.captures[:LISTED_CAPTURES]))
    if len(written.captures) > LISTED_CAPTURES:
        names += f" and {len(written.captures) - LISTED_CAPTURES} more"
    streams, calls = written.tables["streams"], written.tables["calls"]
    if not len(streams):
        return [f"{names}: no stream of RTP was found."]
    packets = int(streams.packets_captured.sum())
    narrowed = f"{len(calls):,} of " if len(calls) < calls_in_all else ""
    counts = [
        narrowed + _many(max(len(calls), calls_in_all), "call"),
        _many(len(streams), "stream"),
        _many(packets, "packet"),
    ]
    begin, end = _local(streams.started.min(), zone), _local(streams.ended.max(), zone)
    until = f"{end:%H:%M:%S}" if begin.date() == end.date() else f"{end:%Y-%m-%d %H:%M:%S}"
    when = f"{begin:%Y-%m-%d %H:%M:%S} to {until} {_zone_name(begin, zone)}."
    return [f"{names}: {', '.join(counts)}", when + _bands(calls)]


def _bands(calls: DataFrame) -> str:
    """How many calls lie in which band, where there are more than one sees at a glance."""
    if len(calls) <= LISTED_CALLS:
        return " Worst first:" if len(calls) > 1 else ""
    best_first = calls.sort_values("r_factor", ascending=False, kind="stable")
    counts = best_first.quality_band.fillna("not rated").value_counts(sort=False)
    return f" By the worse ear {', '.join(f'{count:,} {band}' for band, count in counts.items())}. Worst first:"


def _meaning(calls: DataFrame) -> list[str]:
    rated = calls.r_factor.notna().any()
    return ["R is the rating by ITU-T G.107: 100 at best, below 50 not recommended."] if rated else []


def _call(
    call: Series,
    findings: DataFrame,
    sides: Sequence[Sequence[AssessedStream]],
    streams: DataFrame,
    zone: tzinfo | None,
    columns: int,
) -> str:
    """One call: who and when, the sentence, the figures behind it, the next step."""
    parties = f"{visible(call.caller)} → {visible(call.callee)}"
    when = f"{_local(call.started, zone):%H:%M:%S}"
    fate = "" if call.outcome in ("answered", "media only") else _fate(call)
    coded = visible(_or(call.encoding, ""))
    first = [one for one in (call.call, when, parties, _length(call.duration_s), coded, fate) if one]
    lines = ["  ".join(first), *_sentence(call, findings)]
    reasons: list[str] = []
    for name, side, rating in zip(("caller", "callee"), sides, (call.caller_hears_r, call.callee_hears_r), strict=True):
        if fate and not call.streams:
            continue
        reaching = streams.loc[[one.id for one in side]]
        lines.append(f"{INDENT}{name} hears  {_ear(reaching, rating)}")
        reasons += reaching.rating_note[reaching.r_factor.isna()].dropna().tolist()
    lines += [f"{INDENT}not rated: {reason}" for reason in dict.fromkeys(reasons)]
    lines += _next(call, findings)
    title, *rest = [fill(line, columns, subsequent_indent=INDENT) for line in lines]
    return "\n".join([bold(title), *rest])


def _fate(call: Series) -> str:
    code = str(call.status_code)
    return f"{call.outcome} {code}" if code.isdigit() else str(call.outcome)


def _chief(call: Series, findings: DataFrame) -> Series | None:
    chief = findings[findings.finding == _or(call.headline, "")]
    return chief.iloc[0] if len(chief) else None


def _sentence(call: Series, findings: DataFrame) -> list[str]:
    chief = _chief(call, findings)
    return [] if chief is None else [f"{INDENT}{visible(chief.says)}"]


def _next(call: Series, findings: DataFrame) -> list[str]:
    """What to check, and the names of what else was found."""
    chief = _chief(call, findings)
    lines = [] if chief is None else [f"{INDENT}Next: {visible(_or(chief.check_next, ''))}"]
    others = [name for name in dict.fromkeys(findings.finding) if chief is None or name != chief.finding]
    return lines + ([f"{INDENT}Also found: {', '.join(others)}."] if others else [])


def _ear(streams: DataFrame, rating: float) -> str:
    """What reached one ear: the rating and its band, then what the network and the buffer did."""
    if not len(streams):
        return "nothing: no stream goes this way"
    heard = f"R {figure(rating)} {quality_band(float(rating))}" if rating == rating else "not rated"
    expected = int(streams.packets_expected.sum())
    lost, late = int(streams.packets_lost.sum()), int(streams.packets_discarded.sum())
    network = [
        f"{figure(100 * count / expected)} % {what}" for count, what in ((lost, "lost"), (late, "late")) if count
    ]
    if streams.jitter_ms.notna().any():
        network.append(f"jitter {figure(streams.jitter_ms.max())} ms")
    return f"{heard:<21}  {', '.join(network if lost or late else ['nothing lost', *network])}"


def _rest(rest: DataFrame) -> list[str]:
    if not len(rest):
        return []
    rated = rest.r_factor.dropna()
    floor = f", none of those rated below R {figure(rated.iloc[0])}" if len(rated) else ""
    return [f"{_many(len(rest), 'more call')}{floor}: calls.csv."]


def _notes(written: Written, streams: DataFrame) -> list[str]:
    """What the reader has to know besides: streams without a call, damage, sound left out."""
    notes = []
    alone = int(streams.call.isna().sum())
    if alone:
        notes.append(f"{_many(alone, 'stream')} of no call (video, or unknown): streams.csv.")
    damage = written.tables["damage"]
    for row in damage[:LISTED_DAMAGE].itertuples():
        notes.append(visible(f"Damage in {row.capture} at octet {row.offset}: {row.what}; lost: {row.lost}."))
    if len(damage) > LISTED_DAMAGE:
        notes.append(f"{_many(len(damage) - LISTED_DAMAGE, 'more place')} with damage: damage.csv.")
    return notes + [visible(f"{one[0].upper()}{one[1:]}.") for one in written.cautions if one != CAUTION]


def _place(written: Written) -> str:
    sound = f", {_many(written.audio_files, 'WAV file')} in audio" if written.audio_files else ""
    return f"Report in {visible(str(written.folder))}: tables as CSV and Parquet, audit.json{sound}."


def _excerpt(passed_on: Sequence[Path]) -> list[str]:
    if not passed_on:
        return []
    return [f"Excerpt in {visible(', '.join(map(str, passed_on)))}: names, voices and digits are in it, as captured."]


def _local(time: Timestamp, zone: tzinfo | None) -> datetime:
    moment: datetime = time.to_pydatetime(warn=False)
    return moment.astimezone(zone)


def _zone_name(moment: datetime, zone: tzinfo | None) -> str:
    return str(zone) if zone is not None else moment.tzname() or "local time"


def _length(seconds: float) -> str:
    if seconds < 60:
        return f"{figure(seconds)} s"
    minutes, rest = divmod(round(seconds), 60)
    return f"{minutes} min {rest} s" if minutes < 60 else f"{minutes // 60} h {minutes % 60} min"


def _many(count: int, thing: str) -> str:
    return f"{count:,} {thing}" if count == 1 else f"{count:,} {thing}s"


def _or(value: Any, otherwise: str) -> str:
    """A cell that may be <NA>."""
    return value if isinstance(value, str) else otherwise
