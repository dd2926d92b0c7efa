"""index.html: the page for people, one function per section; ``calls/``: the calls that it has no room for."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rtpaudit import __version__
from rtpaudit.assess.results import AssessedCall
from rtpaudit.findings.words import many
from rtpaudit.profile import Playout
from rtpaudit.report import shell
from rtpaudit.report.call_view import Told, call_view
from rtpaudit.report.clock import Clock
from rtpaudit.report.notes import notes
from rtpaudit.report.plain import Row, rows
from rtpaudit.report.plots import detail_for
from rtpaudit.report.sounds import MOST_INSIDE, Sounds
from rtpaudit.report.verdict import verdict
from rtpaudit.units import NS_PER_MS

if TYPE_CHECKING:
    from pandas import DataFrame

IN_FULL = 20
ROOM_IN_FULL = 2_400_000
"""characters of calls in full; further ones go to files of their own"""
IN_WORDS, LISTED_DAMAGE, LISTED_CAPTURES = 200, 20, 3

# Where the rating is blind to a cause, the call stands in the list as if rated so (common practice).
AS_IF_R = {"fault": 50.0, "concern": 75.0}


@dataclass(frozen=True, slots=True)
class Shown:
    """What the page is made of."""

    tables: Mapping[str, DataFrame]
    """as they may be shown"""
    calls: Sequence[AssessedCall]
    captures: Sequence[str]
    sounds: Sounds
    clock: Clock
    settings: Playout
    """of the playout buffer that was simulated"""
    cautions: Sequence[str]
    """the first stands before the sound, all of them at the end"""
    single_file: bool = False
    told: Told = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "told", Told.of(self.tables))


def write_page(folder: Path, shown: Shown, progress: Callable[[int, int], None] | None = None) -> None:
    """Write the page, and ``calls`` where it needs them; in a single file everything is in it."""
    ordered = worst_first(shown)
    detail = detail_for(len(ordered))
    in_full: list[tuple[str, str]] = []
    room = ROOM_IN_FULL
    for done, call in enumerate(ordered, start=1):
        view = shell.as_json(call_view(call, shown.told, shown.clock, shown.sounds, shown.settings, detail))
        room -= len(view)
        if shown.single_file or not in_full or (len(in_full) < IN_FULL and room > 0):
            in_full.append((call.id, view))
        else:
            room = 0
            _write_call(folder / "calls", call.id, view)
        if progress:
            progress(done, len(ordered))
    _write(folder / "index.html", _page(shown, ordered, in_full))


def worst_first(shown: Shown) -> list[AssessedCall]:
    """Calls by the rating of the worse direction, or by the gravest finding to which the rating is blind."""

    def place(call: AssessedCall) -> tuple[float, float]:
        row = shown.told.calls[call.id]
        blind = [
            AS_IF_R[one["severity"]]
            for one in shown.told.findings_of(call.id)
            if one["severity"] in AS_IF_R and one["r_points"] is None
        ]
        known = [row["r_factor"]] if row["r_factor"] is not None else []
        return min([*known, *blind], default=float("inf")), -(row["loss_pct"] or 0.0)

    return sorted(shown.calls, key=place)


def _write_call(folder: Path, name: str, view: str) -> None:
    folder.mkdir(exist_ok=True)
    _write(folder / f"{name}.js", f"rtpauditCall({view});\n")


def _write(path: Path, text: str) -> None:
    # A file name may bring octets that are no text.
    path.write_bytes(text.encode("utf-8", "replace"))


def _page(shown: Shown, ordered: Sequence[AssessedCall], views: Sequence[tuple[str, str]]) -> str:
    from markupsafe import Markup

    library, script = shell.library(), shell.script()
    calm = [(name, Markup(view)) for name, view in views]
    return shell.render(
        "page.html",
        {
            "policy": shell.policy([library, script]),
            "stylesheet": Markup(shell.stylesheet()),
            "library": Markup(library),
            "script": Markup(script),
            "audit": Markup(shell.as_json(_audit(shown, ordered))),
            "views": calm,
            "sounds": list(_inside(shown, ordered)),
            "version": __version__,
            "zone": _zone(shown),
            **_head(shown),
            **_overview(shown, ordered),
            **_capture(shown),
        },
    )


def _head(shown: Shown) -> dict[str, Any]:
    """What was audited."""
    names = ", ".join(shown.captures[:LISTED_CAPTURES])
    if len(shown.captures) > LISTED_CAPTURES:
        names += f" and {len(shown.captures) - LISTED_CAPTURES} more"
    streams = shown.tables["streams"]
    counts = [many(len(shown.calls), "call"), many(len(streams), "stream"),
              many(int(streams.packets_captured.sum()), "packet")]  # fmt: skip
    heading = [", ".join(counts)]
    if shown.calls:
        begin, end = min(one.started_ns for one in shown.calls), max(one.ended_ns for one in shown.calls)
        heading += [shown.clock.span(begin, end), _zone(shown)]
    return {"title": f"{names}: audit", "captures": names, "heading": " · ".join(heading)}


def _zone(shown: Shown) -> str:
    return shown.clock.name(shown.calls[0].started_ns) if shown.calls else shown.clock.name(0)


def _overview(shown: Shown, ordered: Sequence[AssessedCall]) -> dict[str, Any]:
    """The verdict on each call in one sentence: what is printed, and read where no script runs."""
    lines = []
    for call in ordered[:IN_WORDS]:
        row = shown.told.calls[call.id]
        said = verdict(call, shown.told.findings_of(call.id), shown.clock)
        when = f"{shown.clock.at(call.started_ns):%Y-%m-%d %H:%M:%S}"
        who = f"{when}, {row['caller'] or 'unknown'} → {row['callee'] or 'unknown'}"
        lines.append({"call": call.id, "who": who, "ratings": said.ratings, "sentence": said.sentence})
    rest = len(ordered) - len(lines)
    return {"overview": lines, "left_out": f"{many(rest, 'more call')}: calls.csv." if rest else ""}


def _capture(shown: Shown) -> dict[str, Any]:
    """What the reader has to know of the capture as a whole."""
    damage = rows("damage", shown.tables["damage"][:LISTED_DAMAGE])
    return {
        "damage": damage,
        "damage_left_out": len(shown.tables["damage"]) - len(damage),
        "findings": shown.told.findings.get("", []),
        "caution": shown.cautions[0] if shown.cautions else "",
        "cautions": shown.cautions,
    }


def _audit(shown: Shown, ordered: Sequence[AssessedCall]) -> dict[str, Any]:
    """What the script needs besides the calls themselves."""
    return {
        "sound": shown.sounds.place,
        "calls": [_listed(call, shown.told.calls[call.id], shown.clock) for call in ordered],
        "notes": notes(),
    }


def _listed(call: AssessedCall, row: Row, clock: Clock) -> list[Any]:
    """A call in the list; list.js names the places."""
    return [
        call.id,
        call.started_ns / NS_PER_MS,
        clock.ahead_s(call.started_ns),
        row["caller"],
        row["callee"],
        row["duration_s"],
        row["caller_hears_r"],
        row["callee_hears_r"],
        row["headline"],
        row["outcome"],
        row["status_code"],
        row["encoding"],
        row["call_id"],
        row["capture"],
    ]


def _inside(shown: Shown, ordered: Sequence[AssessedCall]) -> Iterator[tuple[str, str]]:
    """Sound within the page, of the worst calls first as long as there is room."""
    room = MOST_INSIDE if shown.sounds.place == "inside" else 0
    for call in ordered:
        if room <= 0:
            return
        for name, text in shown.sounds.inside(call).items():
            room -= len(text)
            yield name, text
