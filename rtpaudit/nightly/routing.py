"""Routes: for each call the first of the user's routes that one of its rules fits."""

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from ipaddress import IPv4Network, IPv6Network, ip_address, ip_network

from rtpaudit.route import Route


@dataclass(frozen=True, slots=True)
class Way:
    """What may tell by which way a call came or went."""

    addresses: frozenset[str] = frozenset()
    """of its media and its signalling"""
    numbers: tuple[str, ...] = ()
    """caller and callee"""
    vlans: frozenset[int] = frozenset()
    signalling: tuple[str, ...] = ()
    """its messages, one line each"""


@dataclass(slots=True)
class _Rules:
    name: str
    networks: list[IPv4Network | IPv6Network]
    beginnings: tuple[str, ...]
    ranges: list[tuple[str, str]]
    vlans: frozenset[int]
    trunks: re.Pattern[str] | None


@dataclass(slots=True)
class Router:
    """The routes of a profile, ready to be asked."""

    routes: Sequence[Route]
    _rules: list[_Rules] = field(init=False)
    _addresses: dict[str, list[bool]] = field(init=False, default_factory=dict)

    def __post_init__(self) -> None:
        self._rules = [_rules(route) for route in self.routes]

    @property
    def reads_signalling(self) -> bool:
        """Whether any rule asks for more than addresses and VLANs."""
        return any(rules.beginnings or rules.ranges or rules.trunks for rules in self._rules)

    def route(self, way: Way) -> str:
        """Name of the first route that fits, "" where none does."""
        by_address = [self._by_address(address) for address in way.addresses]
        for place, rules in enumerate(self._rules):
            if (
                any(fits[place] for fits in by_address)
                or not rules.vlans.isdisjoint(way.vlans)
                or any(_fits_number(rules, number) for number in way.numbers)
                or (rules.trunks and any(rules.trunks.search(line) for line in way.signalling))
            ):
                return rules.name
        return ""

    def _by_address(self, text: str) -> list[bool]:
        """Whether an address fits each route; asked once for each address."""
        if text not in self._addresses:
            try:
                address = ip_address(text)
            except ValueError:
                fits = [False] * len(self._rules)
            else:
                fits = [any(address in network for network in rules.networks) for rules in self._rules]
            self._addresses[text] = fits
        return self._addresses[text]


def _rules(route: Route) -> _Rules:
    ranges = [tuple(entry.split("-", 1)) for entry in route.numbers if "-" in entry]
    return _Rules(
        name=route.name,
        networks=[ip_network(entry) for entry in route.addresses],
        beginnings=tuple(entry for entry in route.numbers if "-" not in entry),
        ranges=[(first, last) for first, last in ranges],
        vlans=frozenset(route.vlans),
        trunks=_words(route.trunks) if route.trunks else None,
    )


def _words(names: Iterable[str]) -> re.Pattern[str]:
    """Any of several names as a word of its own."""
    return re.compile(rf"(?<![\w.-])(?:{'|'.join(map(re.escape, names))})(?![\w.-])")


def _fits_number(rules: _Rules, number: str) -> bool:
    if rules.beginnings and number.startswith(rules.beginnings):
        return True
    # Texts of digits and of one length stand in the order of their numbers.
    return any(len(number) == len(first) and first <= number <= last for first, last in rules.ranges)
