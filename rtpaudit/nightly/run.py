"""A run from the sources to the pages: audit what is new, report the worst calls, retire, and tell of the nights."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, tzinfo
from pathlib import Path
from typing import TYPE_CHECKING

from rtpaudit.errors import UnusableArguments, UnusableHistory
from rtpaudit.nightly.batch import Progress, Run, Told, plan
from rtpaudit.nightly.calendar import night_of
from rtpaudit.nightly.engine import Engine, LocalProcesses, cores, memory_shares
from rtpaudit.nightly.identity import profile_mark
from rtpaudit.nightly.keys import key_of
from rtpaudit.nightly.limits import Limits
from rtpaudit.nightly.morning import Morning, mornings, write_morning
from rtpaudit.nightly.reading import read_night
from rtpaudit.nightly.retention import Retention, retire
from rtpaudit.nightly.sampling import Sampling
from rtpaudit.nightly.settings import NAMES_KEPT, NAMES_KEYED, AuditSettings
from rtpaudit.nightly.sources import SETTLE_S, Found, list_sources
from rtpaudit.nightly.store import Store
from rtpaudit.nightly.worker import Piece, Task, examine
from rtpaudit.nightly.worst import WORST, report_pieces, write_reports
from rtpaudit.profile import Profile

if TYPE_CHECKING:
    from rtpaudit.signalling.payload_types import Encoding

MOST_WORKERS = 1024


@dataclass(frozen=True, slots=True)
class Options:
    """What a run is asked to do."""

    sources: Sequence[str]
    store: Path
    profile: Profile = field(default_factory=Profile)
    payload_types: "Mapping[int, Encoding]" = field(default_factory=dict)
    delay_ms: float | None = None
    zone_name: str | None = None
    zone: tzinfo | None = None
    names: str = NAMES_KEYED
    digits: bool = False
    sound: bool = False
    """whether the sound is measured too"""
    key: Path | None = None
    sampling: Sampling | None = None
    settle_s: float = SETTLE_S
    workers: int | None = None
    memory_octets: int | None = None
    """for one worker; a part of what is there where left out"""
    cluster: str | None = None
    limits: Limits | None = None
    retention: Retention = field(default_factory=Retention)
    reports: int = WORST
    """worst calls of each night that get a report"""
    with_sound: int = 0
    """worst calls whose sound is kept in it"""


@dataclass(slots=True)
class Done:
    """What a run did."""

    progress: Progress
    unsettled: int
    """captures that still grow"""
    mornings: list[Morning]
    """nights that were added to, or the latest"""
    reports_missing: int = 0
    """worst calls whose captures are not among these sources, so that they have no report"""
    retired: list[date] = field(default_factory=list)


def run_night(options: Options, told: Told) -> Done:
    """Audit what the sources hold and the store does not, and write the pages of the nights that grew.

    Raises
    ------
    UnusableArguments
        If a source names nothing, or options contradict each other.
    UnusableHistory
        If the store is none, or not this version's.
    UnusableOutput
        If the disk is full or refuses; what was committed before stays.
    """
    if options.cluster and options.zone is None:
        raise UnusableArguments("--cluster needs --zone NAME, as the machines of a cluster may have zones of their own")
    listing = list_sources(options.sources, options.settle_s)
    store = Store.open(options.store, create=True)
    settings = _settings(options, store)
    known = set(store.known.batches)
    store.begin()
    try:
        tasks = plan(store, listing.captures, settings, options.zone, options.sampling)
        if store.others_at_work():
            # From the other end, so that two runs over the same captures meet in the middle.
            tasks.reverse()
        progress, at = _audit(options, store, settings, tasks, told)
        grown = _nights_of(store, known)
        missing = _report_worst(options, store, settings, grown, at) if at else 0
    finally:
        store.end()
    retired = retire(store, options.retention, night_of(int(datetime.now(UTC).timestamp() * 1e9), options.zone))
    wanted = sorted({*grown, *retired} or set(store.nights()[-1:]))
    told_of = show(store, wanted, options.zone, options.limits)
    return Done(progress, len(listing.unsettled), told_of, missing, retired)


def show(store: Store, nights: Sequence[date], zone: tzinfo | None, limits: Limits | None) -> list[Morning]:
    """Write the pages of some nights from the store alone; what they tell."""
    latest = store.nights()[-1:]
    found = []
    for morning in mornings(store, nights, zone, limits):
        write_morning(store, morning, latest=morning.night.night in latest)
        found.append(morning)
    return found


def show_all(folder: Path, zone: tzinfo | None, limits: Limits | None) -> list[Morning]:
    """Rebuild every page of a store; what the latest tells comes last."""
    store = Store.open(folder)
    if not store.nights():
        raise UnusableHistory(f"{folder}: holds no night yet; run nightly with sources first")
    return show(store, store.nights(), zone, limits)


def _settings(options: Options, store: Store) -> AuditSettings:
    share, _ = memory_shares(_workers(options))
    return AuditSettings(
        profile=options.profile,
        payload_types=options.payload_types,
        delay_ms=options.delay_ms,
        zone=options.zone_name,
        names=options.names,
        digits=options.digits,
        sound=options.sound,
        key=b"" if options.names == NAMES_KEPT else key_of(store, options.key),
        profile_mark=profile_mark(options.profile, options.payload_types, options.delay_ms, options.sound),
        memory_octets=options.memory_octets or share,
    )


def _workers(options: Options) -> int:
    return min(options.workers or cores(), MOST_WORKERS)


def _audit(
    options: Options, store: Store, settings: AuditSettings, tasks: Sequence[Task], told: Told
) -> tuple[Progress, dict[str, Found]]:
    if not tasks:
        return Progress(), {}
    engine: Engine
    if options.cluster:
        from rtpaudit.nightly.cluster import DaskCluster

        engine = DaskCluster(options.cluster, settings, options.zone)
    else:
        count = min(_workers(options), len(tasks))
        retry = 2 * settings.memory_octets if settings.memory_octets else None
        engine = LocalProcesses(count, examine, settings, options.zone, retry)
    run = Run(store, engine, settings, options.zone, told)
    try:
        return run.go(tasks), run.at
    finally:
        engine.close()


def _nights_of(store: Store, known: set[str]) -> list[date]:
    """Nights to which batches came that were not known."""
    grown = [one for key, one in store.known.batches.items() if key not in known]
    names = {name.split("/", 1)[0] for one in grown for name in one.files}
    return sorted(date.fromisoformat(name.removeprefix("night=")) for name in names)


def _report_worst(
    options: Options, store: Store, settings: AuditSettings, nights: Sequence[date], at: Mapping[str, Found]
) -> int:
    """Write the reports of the worst calls of each night that grew, on this machine; how many can not be written."""
    todo: list[Piece] = []
    missing = 0
    for night in nights:
        pieces, without = report_pieces(store, read_night(store, night), at, options.reports, options.with_sound)
        todo += pieces
        missing += without
    if not todo:
        return missing
    engine = LocalProcesses(min(_workers(options), len(todo)), write_reports, settings, options.zone)
    at_work = 0
    try:
        while todo or at_work:
            while todo and engine.room > 0:
                engine.submit(todo.pop())
                at_work += 1
            at_work -= len(engine.gather(1.0))
    finally:
        engine.close()
    return missing
