"""Groups of calls: by route, codec, hour and endpoint, and each night's figures of each."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, tzinfo
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from rtpaudit.nightly.calendar import hours_of
from rtpaudit.nightly.measures import BAND_MEASURES, MEASURES, RATIOS, TAILS, Figure, Measure, figure, finding_measure
from rtpaudit.nightly.reading import Night

if TYPE_CHECKING:
    from pandas import DataFrame

ALL, ROUTE, CODEC, HOUR, ENDPOINT = "all", "route", "codec", "hour", "endpoint"
DIMENSIONS = (ALL, ROUTE, CODEC, HOUR, ENDPOINT)
NO_ROUTE, UNKNOWN = "no route", "unknown"
MOST_ENDPOINTS = 30
"""Those that took part in most calls."""

MOST_OF_A_KIND = 40
"""Encodings and routes that are told apart; a hostile capture may bring any number of names."""


@dataclass(frozen=True, slots=True)
class Group:
    """Calls that have something in common."""

    dimension: str
    name: str


@dataclass(slots=True)
class Summary:
    """The figures of one night."""

    night: date
    calls: dict[Group, int]
    figures: dict[Group, dict[str, Figure]]

    def figure(self, group: Group, measure: Measure) -> Figure | None:
        """A figure, None where the night has no such group. What was not found in a group has a share of 0."""
        return self.figures.get(group, {}).get(measure.name)


def with_findings(night: Night, kinds: Iterable[str]) -> DataFrame:
    """The calls with a column for each kind of finding, 1 where the call has it."""
    calls = night.calls
    keys = _keys(calls)
    has = {
        f"has {kind}": np.isin(keys, _keys(night.findings[night.findings["finding"] == kind])).astype(np.float64)
        for kind in kinds
    }
    return calls.assign(**has)


def measures_for(kinds: Iterable[str]) -> list[Measure]:
    """What is compared: the measures, and each kind of finding."""
    return [*MEASURES, *(finding_measure(kind) for kind in kinds)]


def members(night: Night, zone: tzinfo | None) -> dict[Group, NDArray[np.int64]]:
    """Rows of the calls of each group."""
    calls = night.calls
    everything = np.arange(len(calls))
    found = {Group(ALL, ALL): everything}
    started = calls["started"].dt.tz_localize(None).to_numpy("M8[ns]").view(np.int64)
    hours = hours_of(started, zone) if len(calls) else np.empty(0, np.int64)
    named = {
        ROUTE: calls["route"].fillna(NO_ROUTE).to_numpy(object),
        CODEC: calls["encoding"].fillna(UNKNOWN).to_numpy(object),
        HOUR: np.array([f"{hour:02d} h" for hour in hours], object),
    }
    for dimension, names in named.items():
        found |= _by_name(dimension, names, everything, MOST_OF_A_KIND)
    return found | _by_endpoint(night)


def _by_name(dimension: str, names: NDArray[Any], rows: NDArray[np.int64], most: int) -> dict[Group, NDArray[np.int64]]:
    if not len(names):
        return {}
    values, codes, counts = np.unique(names.astype(str), return_inverse=True, return_counts=True)
    chosen = sorted(np.argsort(-counts, kind="stable")[:most].tolist())
    return {Group(dimension, str(values[k])): rows[codes == k] for k in chosen}


def _by_endpoint(night: Night) -> dict[Group, NDArray[np.int64]]:
    """An endpoint's calls are those in which a stream came from it or went to it."""
    import pandas as pd

    streams = night.streams.dropna(subset=["call"])
    if not len(streams) or not len(night.calls):
        return {}
    place = pd.Series(np.arange(len(night.calls)), index=pd.Index(_keys(night.calls)))
    place = place[~place.index.duplicated()]
    rows = place.reindex(np.concatenate([_keys(streams)] * 2)).to_numpy(np.float64)
    ends = pd.concat([streams["source"], streams["destination"]]).to_numpy(object)
    pairs = pd.DataFrame({"end": ends, "row": rows}).dropna().drop_duplicates()
    return _by_name(ENDPOINT, pairs["end"].to_numpy(object), pairs["row"].to_numpy(np.int64), MOST_ENDPOINTS)


def _keys(frame: DataFrame) -> NDArray[Any]:
    return np.asarray((frame["capture_id"] + " " + frame["call"].fillna("")).to_numpy(object).astype(str))


def summarise(night: Night, kinds: Sequence[str], zone: tzinfo | None, everything: bool = False) -> Summary:
    """Figures of all groups of a night; ``everything`` beyond what nights are compared by."""
    calls = with_findings(night, kinds)
    measures = measures_for(kinds)
    if everything:
        measures += [*BAND_MEASURES, *RATIOS, *TAILS]
    weight = calls["weight"].to_numpy(np.float64)
    groups = members(night, zone)
    values = {measure.name: (measure, measure.values(calls)) for measure in measures}
    figures = {
        group: {name: figure(measure, of[rows], weight[rows]) for name, (measure, of) in values.items()}
        for group, rows in groups.items()
    }
    return Summary(night.night, {group: len(rows) for group, rows in groups.items()}, figures)


def by_dimension(summary: Summary) -> Mapping[str, list[Group]]:
    """Groups of a night in the order of their names."""
    return {name: sorted((one for one in summary.figures if one.dimension == name), key=lambda one: one.name)
            for name in DIMENSIONS}  # fmt: skip
