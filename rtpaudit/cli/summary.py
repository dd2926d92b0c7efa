"""The summary of a triage: which call is bad, which way and how bad, then what was written where."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from datetime import datetime, tzinfo
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


def as_text(written: Written, assessment: Assessment, zone: tzinfo | None, columns: int) -> str:
    """The summary for people, at most ``columns`` wide where words allow."""
    calls = worst_first(written.tables["calls"])
    streams = written.tables["streams"].set_index("stream")
    sides = {one.id: (one.from_callee, one.from_caller) for one in assessment.calls}
    paragraphs = [_heading(written, zone)]
    if len(calls):
        paragraphs.append(_overview(calls))
    shown = [_call(call, sides[call.call], streams, zone, columns) for _, call in calls[:LISTED_CALLS].iterrows()]
    rest = calls[LISTED_CALLS:]
    wrapped = [fill(text, columns) for text in paragraphs]
    closing = [fill(text, columns) for text in [*_rest(rest), *_notes(written, streams), _place(written), MIND]]
    return "\n".join([*wrapped, *(f"\n{one}" for one in shown), "", *closing])


def as_json(written: Written, limit: float | None, broken: Mapping[str, float]) -> str:
    """The summary for programs: one object, calls with the worst first."""
    tables = written.tables
    head = {
        "schema": "rtpaudit summary",
        "schema_version": SCHEMA_VERSION,
        "rtpaudit": __version__,
        "folder": str(written.folder),
        "captures": written.captures,
        "streams": len(tables["streams"]),
        "packets": int(tables["streams"].packets_captured.sum()),
        "audio_files": written.audio_files,
        "fail_below": limit,
        "below": list(broken),
        "cautions": written.cautions,
    }
    for name, frame in (("calls", worst_first(tables["calls"])), ("damage", tables["damage"])):
        head[name] = json.loads(b"[" + b"".join(json_lines(name, frame)) + b"]")
    return json.dumps(head, indent=1, allow_nan=False)


def worst_first(calls: DataFrame) -> DataFrame:
    """Calls by the rating of their worse direction; those without one behind, by loss."""
    return calls.sort_values(["r_factor", "loss_pct"], ascending=[True, False], kind="stable", na_position="last")


def figure(value: float) -> str:
    """A figure with three significant digits, and no power of ten."""
    return f"{value:,.0f}" if abs(value) >= 100 else f"{value:.3g}"


def _heading(written: Written, zone: tzinfo | None) -> str:
    names = ", ".join(written.captures[:LISTED_CAPTURES])
    if len(written.captures) > LISTED_CAPTURES:
        names += f" and {len(written.captures) - LISTED_CAPTURES} more"
    streams, calls = written.tables["streams"], written.tables["calls"]
    if not len(streams):
        return f"{visible(names)}: no stream of RTP was found."
    begin, end = _local(streams.started.min(), zone), _local(streams.ended.max(), zone)
    until = f"{end:%H:%M:%S}" if begin.date() == end.date() else f"{end:%Y-%m-%d %H:%M:%S}"
    counts = f"{_many(len(calls), 'call')}, {_many(len(streams), 'stream')}"
    packets = _many(int(streams.packets_captured.sum()), "packet")
    return f"{visible(names)}: {counts}, {packets}, {begin:%Y-%m-%d %H:%M:%S} to {until} {_zone_name(begin, zone)}."


def _overview(calls: DataFrame) -> str:
    """How many calls lie in which band, where there are more than one sees at a glance."""
    if len(calls) <= LISTED_CALLS:
        return "Worst first. R by ITU-T G.107: 100 at best, below 50 not recommended."
    bands = calls.sort_values("r_factor", ascending=False, kind="stable").quality_band.fillna("not rated")
    counts = ", ".join(f"{count} {band}" for band, count in bands.value_counts(sort=False).items())
    return f"By the worse ear: {counts}. Worst first; R by ITU-T G.107."


def _call(
    call: Series, sides: Sequence[Sequence[AssessedStream]], streams: DataFrame, zone: tzinfo | None, columns: int
) -> str:
    parties = f"{visible(call.caller)} → {visible(call.callee)}"
    when = f"{_local(call.started, zone):%H:%M:%S}"
    first = f"{call.call}  {when}  {parties}  {_length(call.duration_s)}  {visible(_or(call.encoding, ''))}".rstrip()
    ears = zip(("caller", "callee"), sides, (call.caller_hears_r, call.callee_hears_r), strict=True)
    lines = [_ear(name, streams.loc[[one.id for one in side]], rating) for name, side, rating in ears]
    title = fill(first, columns, subsequent_indent=INDENT)
    return "\n".join(
        [bold(title), *(fill(one, columns, initial_indent=INDENT, subsequent_indent=INDENT) for one in lines)]
    )


def _ear(name: str, streams: DataFrame, rating: float) -> str:
    """What reached one ear: the rating and its band, then what the network did."""
    if not len(streams):
        return f"{name} hears  nothing: no stream goes this way"
    if rating == rating:
        heard = f"R {figure(rating)} {quality_band(float(rating))}"
    else:
        notes = streams.rating_note.dropna()
        heard = f"not rated: {notes.iloc[0]}" if len(notes) else "not rated"
    lost, expected = int(streams.packets_lost.sum()), int(streams.packets_expected.sum())
    network = [f"{figure(100 * lost / expected)} % lost" if lost else "nothing lost"]
    if streams.jitter_ms.notna().any():
        network.append(f"jitter {figure(streams.jitter_ms.max())} ms")
    return f"{name} hears  {heard:<21}  {', '.join(network)}"


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
