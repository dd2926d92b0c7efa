"""What the team reads in the morning: one night with its limits, its changes, its worst calls and its traffic."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, tzinfo
from typing import TYPE_CHECKING

import numpy as np

from rtpaudit.nightly.calendar import NS_PER_S, noon_ns
from rtpaudit.nightly.compare import TREND_NIGHTS, Change, compare, interval_of
from rtpaudit.nightly.disk import told, write_whole
from rtpaudit.nightly.groups import Group, Summary, measures_for, summarise
from rtpaudit.nightly.intervals import Interval, narrowed
from rtpaudit.nightly.journal import DONE
from rtpaudit.nightly.limits import Limits, Verdict, judge, junit, openmetrics
from rtpaudit.nightly.measures import Figure
from rtpaudit.nightly.reading import Night, kinds_in, read_night
from rtpaudit.nightly.store import Store
from rtpaudit.nightly.traffic import BusyHour, Channels, busy_hour, channels_for, lines_for
from rtpaudit.nightly.worst import WORST, reports_of, worst_calls

if TYPE_CHECKING:
    from pandas import DataFrame

JUNIT, OPENMETRICS = "limits.junit.xml", "figures.openmetrics.txt"


@dataclass(frozen=True, slots=True)
class Traffic:
    """The busy hour and what it takes."""

    busy: BusyHour
    channels: Channels


@dataclass(slots=True)
class Morning:
    """All that is told of one night."""

    night: Night
    summary: Summary
    before: Sequence[Summary]
    kinds: Sequence[str]
    changes: list[Change]
    intervals: Mapping[tuple[Group, str], Interval]
    """by how much tonight differs, of the changes that are spoken of"""
    verdicts: list[Verdict]
    worst: "DataFrame"
    reports: Sequence[bool]
    traffic: Traffic | None
    zone: tzinfo | None

    @property
    def broken(self) -> list[Verdict]:
        """Limits that are broken."""
        return [one for one in self.verdicts if one.broken]

    @property
    def spoken_of(self) -> list[Change]:
        """Changes that are beyond noise."""
        return [one for one in self.changes if one.alarm or one.step_is_new]

    def shown(self, figure: Figure) -> Interval:
        """A figure with the interval by which the night's sample knows it; the night itself where all was audited."""
        if not self.night.sampled:
            return Interval(figure.interval.value, figure.interval.value, figure.interval.value)
        audited = float((self.night.captures["status"] == DONE).sum())
        return narrowed(figure.interval, audited, float(self.night.population))


def mornings(store: Store, nights: Sequence[date], zone: tzinfo | None, limits: Limits | None) -> Iterator[Morning]:
    """The nights that are asked for, each compared with those before it, in order of time."""
    wanted = sorted(set(nights) & set(store.nights()))
    if not wanted:
        return
    there = [one for one in store.nights() if one <= wanted[-1]]
    first = max(there.index(wanted[0]) - TREND_NIGHTS, 0)
    kinds = kinds_in(store, there[first:])
    earlier: list[Summary] = []
    for one in there[first:]:
        night = read_night(store, one)
        if one in wanted:
            yield _morning(store, night, earlier[-TREND_NIGHTS:], kinds, zone, limits)
        earlier.append(summarise(night, kinds, zone))


def _morning(
    store: Store,
    night: Night,
    before: Sequence[Summary],
    kinds: Sequence[str],
    zone: tzinfo | None,
    limits: Limits | None,
) -> Morning:
    asked = sorted({*kinds, "one-way-media"})
    summary = summarise(night, asked, zone, everything=True)
    changes = compare(summary, before, measures_for(kinds))
    worst = worst_calls(night, WORST)
    return Morning(
        night=night,
        summary=summary,
        before=before,
        kinds=kinds,
        changes=changes,
        intervals={
            (one.group, one.measure.name): interval_of(one, night, before, asked, zone)
            for one in changes
            if one.alarm or one.step_is_new
        },
        verdicts=judge(limits, summary) if limits else [],
        worst=worst,
        reports=reports_of(store.night_folder(night.night), worst),
        traffic=_traffic(night),
        zone=zone,
    )


def _traffic(night: Night) -> Traffic | None:
    calls = night.calls
    started, ended = (
        calls[name].dt.tz_localize(None).to_numpy("M8[ns]").view(np.int64) for name in ("started", "ended")
    )
    busy = busy_hour(started, ended, calls["weight"].to_numpy(np.float64))
    return Traffic(busy, lines_for(channels_for(busy.erlangs))) if busy else None


def write_morning(store: Store, morning: Morning, latest: bool) -> None:
    """Write the page of a night, and for collectors its figures and verdicts; those of the latest night twice.

    Raises
    ------
    UnusableOutput
        If the disk refuses.
    """
    from rtpaudit.nightly.page import page

    folder = store.night_folder(morning.night.night)
    begin_s = noon_ns(morning.night.night, morning.zone) // NS_PER_S
    with told(store.folder):
        for place in [folder, store.folder] if latest else [folder]:
            write_whole(place / OPENMETRICS, openmetrics(morning.summary, morning.verdicts, begin_s).encode())
            if morning.verdicts:
                write_whole(place / JUNIT, junit(morning.verdicts, morning.night.night.isoformat()).encode())
        write_whole(folder / "index.html", page(store, morning).encode("utf-8", "replace"))
