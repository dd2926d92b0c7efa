"""Last night's captures: audited unattended, kept, compared with the nights before, and held against limits."""

from __future__ import annotations

import json as _json
import os
import signal
import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from rtpaudit.cli import options
from rtpaudit.cli.start import settle
from rtpaudit.cli.terminal import complain, say, visible
from rtpaudit.errors import UnusableArguments

if TYPE_CHECKING:
    from datetime import tzinfo

    from rtpaudit.nightly.batch import Progress
    from rtpaudit.nightly.limits import Limits
    from rtpaudit.nightly.morning import Morning
    from rtpaudit.nightly.run import Done, Options
    from rtpaudit.nightly.sampling import Sampling

INTERRUPTED = 128 + signal.SIGINT
LINE_EVERY_S = 60.0
SCHEMA_VERSION = 1
_UNITS = {"": 1, "K": 1024, "M": 1024**2, "G": 1024**3, "T": 1024**4}

Sources = Annotated[
    list[str] | None,
    typer.Argument(metavar="SOURCE", help="Folder, file, pattern, or an address such as s3://bucket/captures."),
]
StoreFolder = Annotated[Path | None, typer.Option("--store", metavar="DIR", help="Where the nights are kept.")]
Show = Annotated[Path | None, typer.Option("--show", metavar="DIR", help="Rebuild the pages of a store; no source.")]
LimitsFile = Annotated[
    Path | None, typer.Option("--limits", metavar="FILE", help="Limits as TOML; exit status 1 where one is broken.")
]
Share = Annotated[str | None, typer.Option("--share", metavar="5%", help="Audit a share of each night's captures.")]
Calls = Annotated[
    int | None,
    typer.Option("--calls", metavar="N", help="Audit so many captures of each night, one call each as a rule."),
]
Seed = Annotated[int, typer.Option("--seed", metavar="N", help="Of the sample; the same seed draws the same.")]
By = Annotated[str | None, typer.Option("--by", metavar="route|hour", help="Draw the sample evenly within these.")]
Keep = Annotated[str | None, typer.Option("--keep", metavar="30d", help="How long names, reports and sound are kept.")]
KeepFigures = Annotated[
    str | None, typer.Option("--keep-figures", metavar="400d", help="How long figures are kept; for ever if left out.")
]
Audio = Annotated[str | None, typer.Option("--audio", metavar="worst:20", help="Keep the sound of the worst calls.")]
Sound = Annotated[bool, typer.Option("--sound", help="Decode and measure the sound too; takes ten times as long.")]
Reports = Annotated[int, typer.Option("--reports", metavar="N", help="Worst calls of a night that get a full page.")]
Names = Annotated[bool, typer.Option("--names", help="Keep party names; otherwise keyed pseudonyms stand for them.")]
Key = Annotated[
    Path | None, typer.Option("--key", metavar="FILE", help="Key of the pseudonyms, made where it is not there yet.")
]
Jobs = Annotated[int | None, typer.Option("--jobs", metavar="N", help="Worker processes; one a core if left out.")]
Memory = Annotated[str | None, typer.Option("--memory", metavar="4G", help="What one worker process may take.")]
Settle = Annotated[
    float | None, typer.Option("--settle", metavar="S", help="Files that changed within S seconds wait; 60.")
]
Cluster = Annotated[
    str | None, typer.Option("--cluster", metavar="ADDRESS", help="Scheduler of a Dask cluster that does the work.")
]


def nightly(
    sources: Sources = None,
    store: StoreFolder = None,
    show: Show = None,
    limits: LimitsFile = None,
    share: Share = None,
    calls: Calls = None,
    seed: Seed = 0,
    by: By = None,
    sound: Sound = False,
    reports: Reports = 20,
    audio: Audio = None,
    keep: Keep = None,
    keep_figures: KeepFigures = None,
    names: Names = False,
    key: Key = None,
    jobs: Jobs = None,
    memory: Memory = None,
    settle_s: Settle = None,
    cluster: Cluster = None,
    payload_type: options.PayloadTypes = None,
    delay: options.Delay = None,
    profile: options.ProfileFile = None,
    zone: options.Zone = None,
    private: options.Private = False,
    digits: options.Digits = False,
    quiet: options.Quiet = False,
    json: options.Json = False,
) -> int:
    """Audit what is new among many captures, keep the figures, and write the morning page."""
    where = options.zone(zone)
    if show is not None:
        if sources or store is not None:
            raise UnusableArguments("--show rebuilds pages from the store alone; leave out sources and --store")
        return _show(show, where, _limits(limits), quiet, json)
    if not sources or store is None:
        raise UnusableArguments("nightly needs sources and --store DIR, or --show DIR alone")
    if private and (names or audio):
        raise UnusableArguments("--private keeps neither names nor sound; leave out --names and --audio")

    from rtpaudit.nightly.retention import Retention, parse_keep
    from rtpaudit.nightly.run import Options
    from rtpaudit.nightly.settings import NAMES_KEPT, NAMES_KEYED, PRIVATE
    from rtpaudit.nightly.sources import SETTLE_S
    from rtpaudit.nightly.worst import parse_audio

    asked = Options(
        sources=sources,
        store=store,
        profile=options.profile(profile),
        payload_types=options.payload_types(payload_type),
        delay_ms=options.delay_ms(delay),
        zone_name=zone,
        zone=where,
        names=PRIVATE if private else NAMES_KEPT if names else NAMES_KEYED,
        digits=digits and not private,
        sound=sound,
        key=key,
        sampling=_sampling(share, calls, seed, by),
        settle_s=SETTLE_S if settle_s is None else settle_s,
        workers=_at_least_one("--jobs", jobs),
        memory_octets=_octets(memory),
        cluster=cluster,
        limits=_limits(limits),
        retention=Retention(
            names=None if keep is None else parse_keep(keep),
            figures=None if keep_figures is None else parse_keep(keep_figures, "--keep-figures"),
        ),
        reports=max(reports, 0),
        with_sound=0 if audio is None else parse_audio(audio),
    )
    return _run(asked, quiet, json)


def _run(asked: Options, quiet: bool, json: bool) -> int:
    from rtpaudit.nightly.run import run_night

    settle()
    watch = Watch(shown=not quiet and not json)
    try:
        done = run_night(asked, watch.told)
    except KeyboardInterrupt:
        watch.close()
        complain("interrupted; what was audited is in the store, the rest follows with the next run")
        return INTERRUPTED
    finally:
        watch.close()
    if json:
        say(_as_json(done.mornings, done))
    elif not quiet:
        say(_as_text(done, asked.store))
    return _verdict(done.mornings)


def _show(folder: Path, zone: tzinfo | None, limits: Limits | None, quiet: bool, json: bool) -> int:
    from rtpaudit.nightly.run import show_all

    settle()
    mornings = show_all(folder, zone, limits)
    latest = mornings[-1:]
    if json:
        say(_as_json(latest, None))
    elif not quiet:
        say(f"{len(mornings)} pages written. {_pages(folder, latest)}")
    return _verdict(latest)


def _verdict(mornings: list[Morning]) -> int:
    """Exit status; each broken limit in a line of its own on standard error."""
    broken = [(one.night.night, verdict) for one in mornings for verdict in one.broken]
    for night, verdict in broken:
        complain(f"night {night}: {verdict.sentence}")
    return 1 if broken else 0


def _limits(path: Path | None) -> Limits | None:
    if path is None:
        return None
    from rtpaudit.nightly.limits import Limits

    return Limits.read(path)


def _sampling(share: str | None, calls: int | None, seed: int, by: str | None) -> Sampling | None:
    from rtpaudit.nightly.sampling import STRATA, Sampling, parse_share

    if share is not None and calls is not None:
        raise UnusableArguments("--share and --calls both say how many; give one of them")
    if by is not None and by not in STRATA[1:]:
        raise UnusableArguments(f"--by {by!r} is not known: route or hour")
    if share is None and calls is None:
        if by is not None:
            raise UnusableArguments("--by says how a sample is drawn; give --share or --calls with it")
        return None
    if not -(2**63) <= seed < 2**63:
        raise UnusableArguments(f"--seed {seed} is not within 64 bits")
    number = _at_least_one("--calls", calls)
    return Sampling(None if share is None else parse_share(share), number, seed, by or "")


def _at_least_one(option: str, count: int | None) -> int | None:
    if count is not None and count < 1:
        raise UnusableArguments(f"{option} {count} is less than 1")
    return count


def _octets(text: str | None) -> int | None:
    if text is None:
        return None
    number, unit = (text[:-1], text[-1].upper()) if text[-1:].isalpha() else (text, "")
    if not number.isdigit() or unit not in _UNITS or int(number) == 0:
        raise UnusableArguments(f"--memory {text!r} is no amount: write it as 800M or 4G")
    return int(number) * _UNITS[unit]


def _as_text(done: Done, store: Path) -> str:
    progress = done.progress
    said = []
    if progress.captures:
        calls = f"{progress.calls:,} calls in {progress.captures_done:,} captures"
        said.append(f"{calls}{f', {progress.failed:,} failed' if progress.failed else ''}.")
        if progress.known:
            said.append(f"{progress.known:,} known from before under another name.")
    else:
        said.append("Nothing new.")
    waiting = progress.left + done.unsettled
    if waiting:
        said.append(f"{waiting:,} still being written, left for the next run.")
    return "\n".join([" ".join(said), _pages(store, done.mornings)])


def _pages(store: Path, mornings: list[Morning]) -> str:
    from rtpaudit.nightly.page import sentence

    if not mornings:
        return f"The store {visible(str(store))} holds no night yet."
    lines = [f"Night {one.night.night}: {sentence(one)}" for one in mornings]
    page = store / f"night={mornings[-1].night.night}" / "index.html"
    return "\n".join([*lines, f"Page: {visible(str(page))}"])


def _as_json(mornings: list[Morning], done: Done | None) -> str:
    """The summary for programs."""
    summary: dict[str, Any] = {"schema": "rtpaudit nightly summary", "schema_version": SCHEMA_VERSION}
    if done is not None:
        progress = done.progress
        summary |= {"captures": progress.captures_done, "calls": progress.calls, "failed": progress.failed,
                    "known": progress.known, "waiting": progress.left + done.unsettled}  # fmt: skip
    summary["nights"] = [_night(one) for one in mornings]
    return _json.dumps(summary, indent=1, allow_nan=False)


def _night(morning: Morning) -> dict[str, Any]:
    from rtpaudit.nightly.page import sentence

    return {
        "night": morning.night.night.isoformat(),
        "calls": len(morning.night.calls),
        "says": sentence(morning),
        "limits": [
            {
                "group": one.limit.group.name,
                "limit": one.limit.name,
                "value": one.limit.limit,
                "measured": None if one.passed_over else one.measured,
                "calls": one.count,
                "broken": one.broken,
            }
            for one in morning.verdicts
        ],
        "changes": [
            {
                "dimension": one.group.dimension,
                "group": one.group.name,
                "measure": one.measure.name,
                "before": one.before,
                "tonight": one.tonight.interval.value,
                "worse": one.worse,
                "since": None if one.step is None else one.step.isoformat(),
            }
            for one in morning.spoken_of
        ],
    }


class Watch:
    """How a run comes along: a bar where somebody watches, a line a minute where a log does."""

    def __init__(self, shown: bool) -> None:
        self._shown = shown
        self._bar: Any = None
        self._task: Any = None
        self._began = self._last = time.monotonic()

    def told(self, progress: Progress) -> None:
        """Take note of how far the run has come."""
        if not self._shown or not progress.captures:
            return
        now = time.monotonic()
        if sys.stderr.isatty() and os.environ.get("TERM") != "dumb":
            self._draw(progress)
        elif now - self._last >= LINE_EVERY_S:
            self._last = now
            complain(_line(progress, now - self._began))

    def close(self) -> None:
        """Take the bar away."""
        if self._bar is not None:
            self._bar.stop()
            self._bar = None

    def _draw(self, progress: Progress) -> None:
        if self._bar is None:
            self._bar = _bar()
            self._bar.start()
            self._task = self._bar.add_task("Auditing", total=max(progress.octets, 1), pace="")
        pace = progress.captures_done / max(time.monotonic() - self._began, 1e-3)
        said = f"{progress.captures_done:,} of {progress.captures:,} captures, {pace:.0f}/s"
        self._bar.update(self._task, completed=progress.octets_done, pace=said)


def _line(progress: Progress, elapsed_s: float) -> str:
    """One line for a log: how many, how fast, how long still."""
    pace = progress.captures_done / elapsed_s
    left = (progress.octets - progress.octets_done) / max(progress.octets_done / elapsed_s, 1.0)
    still = f", {left / 60.0:.0f} min left" if progress.octets_done else ""
    failed = f", {progress.failed:,} failed" if progress.failed else ""
    return f"{progress.captures_done:,} of {progress.captures:,} captures, {pace:.0f}/s{still}{failed}"


def _bar() -> Any:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeRemainingColumn

    columns = (
        TextColumn("{task.description}"),
        BarColumn(),
        TaskProgressColumn(),
        TextColumn("{task.fields[pace]}"),
        TimeRemainingColumn(),
    )
    return Progress(*columns, console=Console(stderr=True), transient=True)
