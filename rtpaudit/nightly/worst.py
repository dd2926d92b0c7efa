"""The worst calls of a night: which they are, and the report of each, with its sound where that is asked for."""

import shutil
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import tzinfo
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rtpaudit.errors import RtpAuditError, UnusableArguments
from rtpaudit.nightly.disk import make_folder
from rtpaudit.nightly.names import hide_in_report
from rtpaudit.nightly.reading import Night
from rtpaudit.nightly.retention import REPORTS
from rtpaudit.nightly.settings import PRIVATE, AuditSettings
from rtpaudit.nightly.sources import Found
from rtpaudit.nightly.store import Store
from rtpaudit.nightly.worker import Examined, Piece, Result, Task, at_hand

if TYPE_CHECKING:
    from pandas import DataFrame

WORST = 20
"""Calls of a night that the page shows and that get a report."""

# A fault to which the rating is blind, such as sound one way only, ranks as a rating of so much (common practice).
AS_IF_R = 50.0


@dataclass(frozen=True, slots=True)
class ReportTask(Task):
    """Reports of some calls of one capture."""

    calls: tuple[tuple[str, str, bool], ...] = ()
    """id, folder, and whether with sound"""


def parse_audio(text: str) -> int:
    """Number of worst calls whose sound is kept (``worst:20``).

    Raises
    ------
    UnusableArguments
        If it names none.
    """
    kind, _, count = text.partition(":")
    if kind != "worst" or not count.isdigit() or not 0 < int(count) <= 10_000:
        raise UnusableArguments(f"--audio {text!r} is not understood: write it as worst:20")
    return int(count)


def worst_calls(night: Night, count: int) -> "DataFrame":
    """The worst calls, the worst first, with the folder of the report of each."""
    calls = night.calls
    faults = night.findings[night.findings["severity"] == "fault"]
    faulty = (calls["capture_id"] + " " + calls["call"]).isin(faults["capture_id"] + " " + faults["call"])
    rating = calls["r_factor"].where(calls["r_factor"].notna(), float("inf"))
    rank = rating.where(~faulty, rating.clip(upper=AS_IF_R))
    ordered = calls.assign(_rank=rank, _loss=-calls["loss_pct"].fillna(0.0)).sort_values(
        ["_rank", "_loss", "capture_id", "call"], kind="stable"
    )
    ordered = ordered[(ordered["_rank"] < float("inf")) | (ordered["_loss"] < 0.0)].head(count)
    return ordered.assign(report=REPORTS + "/" + ordered["capture_id"].str[:12] + "-" + ordered["call"])


def report_pieces(
    store: Store, night: Night, at: Mapping[str, Found], count: int, with_sound: int
) -> tuple[list[Piece], int]:
    """Reports that are to be written, and how many can not be, as their captures were not among these sources."""
    folder = store.night_folder(night.night)
    wanted = worst_calls(night, max(count, with_sound))
    _take_away(folder, set(wanted["report"]))
    tasks: dict[str, list[tuple[str, str, bool]]] = {}
    missing = 0
    for place, row in enumerate(wanted.itertuples()):
        target, sound = folder / row.report, place < with_sound
        if (target / "index.html").exists() and (not sound or (target / "audio").is_dir()):
            continue
        if row.capture_id not in at:
            missing += 1
            continue
        tasks.setdefault(row.capture_id, []).append((row.call, str(target), sound))
    pieces = [
        Piece(number, (ReportTask(at[capture], calls=tuple(calls)),))
        for number, (capture, calls) in enumerate(tasks.items())
    ]
    return pieces, missing


def _take_away(folder: Path, wanted: set[str]) -> None:
    """Reports of calls that are not among the worst any more."""
    there = folder / REPORTS
    for one in there.iterdir() if there.is_dir() else ():
        if f"{REPORTS}/{one.name}" not in wanted:
            shutil.rmtree(one, ignore_errors=True)


def write_reports(
    piece: Piece, settings: AuditSettings, zone: tzinfo | None, beginning: Callable[[int], None] | None = None
) -> Result:
    """Write the reports of a piece; in a worker process, so that what kills it kills no more."""
    result = Result()
    for place, task in enumerate(piece.tasks):
        if beginning:
            beginning(place)
        assert isinstance(task, ReportTask)
        result.examined.append(_write(task, settings, zone))
    return result


def _write(task: ReportTask, settings: AuditSettings, zone: tzinfo | None) -> Examined:
    from rtpaudit.media.selection import Selection
    from rtpaudit.report.folder import write_folder
    from rtpaudit.walk import audit

    try:
        with at_hand(task.found) as path:
            for call, folder, sound in task.calls:
                found = audit(
                    path,
                    profile=settings.profile,
                    payload_types=settings.payload_types,
                    delay_ms=settings.delay_ms,
                    select=Selection(calls=(call,)),
                    digits=settings.digits,
                )
                make_folder(Path(folder).parent)
                shown = _Shown(found, settings)
                write_folder(shown, Path(folder), audio=sound and settings.names != PRIVATE, zone=zone)
    except (RtpAuditError, OSError, MemoryError) as fault:
        return Examined(task, "failed", reason=str(fault))
    return Examined(task, "done")


class _Shown:
    """An audit as the store may show it."""

    def __init__(self, found: Any, settings: AuditSettings) -> None:
        self.sound = found.sound
        self.profile = replace(found.profile, routes=())
        captures = list(found.assessment.captures)
        self.tables, captures = hide_in_report(found.tables, captures, settings.names, settings.key)
        self.assessment = replace(found.assessment, captures=captures)


def reports_of(night_folder: Path, calls: "DataFrame") -> Sequence[bool]:
    """Which of the worst calls have a report."""
    return [(night_folder / report / "index.html").exists() for report in calls["report"]]
