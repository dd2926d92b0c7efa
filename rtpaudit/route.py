"""Routes: the user's rules that say by which way a call came or went."""

import re
from collections.abc import Mapping
from dataclasses import dataclass, fields
from ipaddress import ip_network
from typing import Any

from rtpaudit.errors import UnusableProfile

# The beginning of a number ("+44141", "0141") or a range of numbers of one length ("0100-0199").
_NUMBERS = re.compile(r"(?P<first>\+?[0-9]{1,20})(-(?P<last>\+?[0-9]{1,20}))?")


@dataclass(frozen=True, slots=True)
class Route:
    """One route: a call belongs to it when any of its rules fits."""

    name: str
    addresses: tuple[str, ...] = ()
    """addresses or prefixes, such as 192.0.2.0/24"""
    numbers: tuple[str, ...] = ()
    """how numbers begin, or ranges of numbers of one length"""
    vlans: tuple[int, ...] = ()
    """VLAN ids"""
    trunks: tuple[str, ...] = ()
    """trunk names, as they stand in the signalling"""

    def __post_init__(self) -> None:
        if not isinstance(self.name, str) or not self.name.strip():
            raise UnusableProfile(f"a route is named {self.name!r}, permitted is a text that is not empty")
        if not any(getattr(self, rule) for rule in _CHECKS):
            raise UnusableProfile(f"route {self.name!r} has no rule, it needs one of {', '.join(_CHECKS)}")
        for rule, check in _CHECKS.items():
            for entry in getattr(self, rule):
                check(f"route {self.name!r} has in {rule} {entry!r}", entry)


def route_of(key: str, table: Mapping[str, Any]) -> Route:
    """A route from its table in the profile, whose keys are known ones; ``key`` is how a refusal calls it."""
    if "name" not in table:
        raise UnusableProfile(f"{key} has no name")
    for rule in _CHECKS:
        if not isinstance(table.get(rule, []), list):
            raise UnusableProfile(f"{key}.{rule} is {table[rule]!r}, it has to be a list")
    values: dict[str, Any] = {name: tuple(value) if name in _CHECKS else value for name, value in table.items()}
    return Route(**values)


ROUTE_KEYS = tuple(one.name for one in fields(Route))


def _check_address(found: str, entry: Any) -> None:
    if not isinstance(entry, str):
        raise UnusableProfile(f"{found}, permitted is a text with an address or a prefix")
    try:
        ip_network(entry)
    except ValueError as fault:
        raise UnusableProfile(f"{found}, permitted is an address or a prefix: {fault}") from fault


def _check_number(found: str, entry: Any) -> None:
    match = _NUMBERS.fullmatch(entry) if isinstance(entry, str) else None
    if not match:
        raise UnusableProfile(f'{found}, permitted is a text such as "+44141" or "0100-0199"')
    first, last = match["first"], match["last"]
    if last is not None and (len(first) != len(last) or first > last):
        raise UnusableProfile(f"{found}, permitted is a range whose ends have one length and stand in order")


def _check_vlan(found: str, entry: Any) -> None:
    if isinstance(entry, bool) or not isinstance(entry, int) or not 1 <= entry <= 4094:
        raise UnusableProfile(f"{found}, permitted is 1 to 4094")


def _check_trunk(found: str, entry: Any) -> None:
    if not isinstance(entry, str) or not entry:
        raise UnusableProfile(f"{found}, permitted is a text that is not empty")


_CHECKS = {"addresses": _check_address, "numbers": _check_number, "vlans": _check_vlan, "trunks": _check_trunk}
