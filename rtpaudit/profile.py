"""Profile: what a user knows of the network, the receiver and the limits, as frozen values, read from TOML.

Unknown keys and values outside their permitted range are refused in one sentence that names file, key and range.
Python users build the same thing: ``Profile(playout=Playout(nominal_ms=80))``.
"""

import itertools
import tomllib
from collections.abc import Collection, Mapping
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import Any

from rtpaudit.errors import UnusableProfile
from rtpaudit.planning import PARAMETERS, CodecValues, PlanningValues
from rtpaudit.route import ROUTE_KEYS, Route, route_of

__all__ = ["CodecValues", "Listening", "Network", "PlanningValues", "Playout", "Profile", "Route"]

PLAYOUT_KINDS = ("fixed", "adaptive", "percentile", "ideal")


@dataclass(frozen=True, slots=True)
class Permitted:
    """What a number of the profile may be, and what it means."""

    low: float
    high: float
    unit: str
    meaning: str


def _setting(default: float | None, low: float, high: float, unit: str, meaning: str) -> Any:
    return field(default=default, metadata={"permitted": Permitted(low, high, unit, meaning)})


@dataclass(frozen=True, slots=True)
class Playout:
    """The receiver's playout buffer."""

    kind: str = "fixed"
    """one of PLAYOUT_KINDS"""
    nominal_ms: float = _setting(60.0, 0, 2000, "ms", "delay of the first packet in the buffer")
    minimum_ms: float = _setting(10.0, 0, 2000, "ms", "least delay of the adaptive and the percentile buffer")
    maximum_ms: float = _setting(200.0, 0, 5000, "ms", "greatest delay of those two")
    reset_pause_ms: float = _setting(200.0, 20, 10_000, "ms", "pause from which the delay is set anew")
    late_pct: float = _setting(1.0, 0, 20, "%", "share of packets that the percentile buffer lets come too late")


@dataclass(frozen=True, slots=True)
class Network:
    """One-way delay of the network between the mouths and ears, without packet time and playout."""

    delay_ms: float | None = _setting(None, 0, 5000, "ms", "the delay, where it is known")
    assumed_ms: float = _setting(50.0, 0, 5000, "ms", "taken where it is neither known nor measured")
    low_ms: float = _setting(5.0, 0, 5000, "ms", "least that it may be, for r_factor_high")
    high_ms: float = _setting(150.0, 0, 5000, "ms", "greatest that it may be, for r_factor_low")


@dataclass(frozen=True, slots=True)
class Listening:
    """Clips for a listening check."""

    level_dbov: float = _setting(-26.0, -45, -15, "dBov", "active speech level that every clip is brought to")
    peak_dbov: float = _setting(-6.0, -30, -1, "dBov", "no sample goes over this")
    clip_s: float = _setting(10.0, 3, 60, "s", "length that a clip aims at")


@dataclass(frozen=True, slots=True)
class Profile:
    """Everything that a user can set; ``Profile()`` is what holds without a file."""

    playout: Playout = field(default_factory=Playout)
    conceals_loss: bool = True
    """whether the receiver conceals lost G.711 packets (Bpl 25.1) or plays silence (4.3)"""
    network: Network = field(default_factory=Network)
    planning: PlanningValues = field(default_factory=PlanningValues)
    encodings: Mapping[str, CodecValues] = field(default_factory=dict)
    """Ie and Bpl by media subtype, where the user has his own"""
    limits: Mapping[str, float] = field(default_factory=dict)
    """limit by name of finding, in the finding's unit"""
    listening: Listening = field(default_factory=Listening)
    routes: tuple[Route, ...] = ()

    def __post_init__(self) -> None:
        _check_numbers("playout", self.playout)
        _check_numbers("network", self.network)
        _check_numbers("listening", self.listening)
        _check_planning(self.planning)
        for name, values in self.encodings.items():
            _check_planning(values, f"encodings.{name}")
        for name, limit in self.limits.items():
            _check_number(f"limits.{name}", limit, Permitted(-1e9, 1e9, "", ""))
        if not isinstance(self.conceals_loss, bool):
            raise UnusableProfile(f"conceals_loss is {self.conceals_loss!r}, permitted are true and false")
        _check_choice("playout.kind", self.playout.kind, PLAYOUT_KINDS)
        _check_order("playout", self.playout, "minimum_ms", "maximum_ms")
        if self.playout.kind in ("adaptive", "percentile"):
            _check_order("playout", self.playout, "minimum_ms", "nominal_ms", "maximum_ms")
        _check_order("network", self.network, "low_ms", "assumed_ms", "high_ms")
        _check_distinct("routes", [route.name for route in self.routes])

    @classmethod
    def read(cls, path: str | Path) -> "Profile":
        """A profile from a TOML file; UnusableProfile says in one sentence what is wrong with it, and where."""
        try:
            with open(path, "rb") as file:
                table = tomllib.load(file)
        except OSError as fault:
            raise UnusableProfile(f"{path}: cannot be read: {fault.strerror}") from fault
        # Besides faults of grammar: octets that are not UTF-8, numbers of thousands of digits, endless nesting.
        except (ValueError, RecursionError) as fault:
            raise UnusableProfile(f"{path}: is not TOML: {fault}") from fault
        try:
            return cls.from_table(table)
        except UnusableProfile as fault:
            raise UnusableProfile(f"{path}: {fault}") from fault

    @classmethod
    def from_table(cls, table: Mapping[str, Any]) -> "Profile":
        """A profile from what a TOML file holds."""
        _check_keys("", table, [one.name for one in fields(cls)])
        parts = {"playout": Playout, "network": Network, "planning": PlanningValues, "listening": Listening}
        made: dict[str, Any] = {name: _part(name, kind, table[name]) for name, kind in parts.items() if name in table}
        if "conceals_loss" in table:
            made["conceals_loss"] = table["conceals_loss"]
        if "encodings" in table:
            entries = _table("encodings", table["encodings"])
            made["encodings"] = {name: _codec_values(f"encodings.{name}", each) for name, each in entries.items()}
        if "limits" in table:
            made["limits"] = _table("limits", table["limits"])
        if "routes" in table:
            made["routes"] = tuple(_routes(table["routes"]))
        return cls(**made)

    def check_limits(self, known: Collection[str]) -> None:
        """Refuse a limit for a finding that does not exist; the rules' own room knows which there are."""
        _check_keys("limits", self.limits, known)


def _table(key: str, value: Any) -> dict[str, Any]:
    if not isinstance(value, dict):
        raise UnusableProfile(f"{key} is {value!r}, it has to be a table: [{key}]")
    return value


def _part(name: str, kind: type, value: Any) -> Any:
    table = _table(name, value)
    _check_keys(name, table, [one.name for one in fields(kind)])
    return kind(**table)


def _codec_values(key: str, value: Any) -> CodecValues:
    table = _table(key, value)
    _check_keys(key, table, ["Ie", "Bpl"])
    if "Ie" not in table:
        raise UnusableProfile(f"{key} has no Ie, which a rating needs")
    return CodecValues(**table)


def _routes(value: Any) -> list[Route]:
    if not isinstance(value, list):
        raise UnusableProfile("routes has to be a list of tables, each headed [[routes]]")
    routes = []
    for place, entry in enumerate(value, start=1):
        key = f"routes entry {place}"
        table = _table(key, entry)
        _check_keys(key, table, ROUTE_KEYS)
        routes.append(route_of(key, table))
    return routes


def _check_keys(where: str, table: Mapping[str, Any], known: Collection[str]) -> None:
    for name in table:
        if name not in known:
            raise UnusableProfile(f"unknown key {where + '.' if where else ''}{name}, known are {', '.join(known)}")


def _check_numbers(where: str, part: Any) -> None:
    for one in fields(part):
        value, permitted = getattr(part, one.name), one.metadata.get("permitted")
        if permitted and not (value is None and one.default is None):
            _check_number(f"{where}.{one.name}", value, permitted)


def _check_planning(values: PlanningValues | CodecValues, where: str = "planning") -> None:
    for one in fields(values):
        value, row = getattr(values, one.name), PARAMETERS[one.name]
        if not (value is None and one.default is None):
            _check_number(f"{where}.{one.name}", value, Permitted(row.low, row.high, row.unit, row.meaning))


def _check_number(key: str, value: Any, permitted: Permitted) -> None:
    bounds = f"permitted is {permitted.low:g} to {permitted.high:g} {permitted.unit}".rstrip()
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise UnusableProfile(f"{key} is {value!r}, which is no number; {bounds}")
    if not permitted.low <= value <= permitted.high:
        raise UnusableProfile(f"{key} is {value}, {bounds}")


def _check_choice(key: str, value: Any, known: Collection[str]) -> None:
    if value not in known:
        raise UnusableProfile(f"{key} is {value!r}, permitted are {', '.join(known)}")


def _check_order(where: str, part: Any, *names: str) -> None:
    for below, above in itertools.pairwise(names):
        low, high = getattr(part, below), getattr(part, above)
        if low > high:
            raise UnusableProfile(f"{where}.{below} is {low}, permitted is up to {above}, which is {high}")


def _check_distinct(where: str, names: list[str]) -> None:
    for name in names:
        if names.count(name) > 1:
            raise UnusableProfile(f"{where} has {name!r} twice, each name may stand once")
