"""Sightings of one Call-ID come in, call legs go out: told apart by the caller's tag and by the media they announce.

A message that a proxy hands on is seen once on every hop, and all hops are one leg, as long as the media addresses in
it stay what they were. Where a relay puts its own addresses into them, both ways, media flows on two legs, and there
are two.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field

from rtpaudit.signalling.calls import CALLEE, CALLER
from rtpaudit.signalling.sightings import Sighting

MAX_HOPS = 32
"""More pairs of addresses than this under one Call-ID are no path of proxies, and are taken as one."""

CALL_MARKS = frozenset({"INVITE", "ACK", "CANCEL", "BYE", "PRACK", "UPDATE"})
"""methods of which one at least is needed to call it a call"""


@dataclass(slots=True)
class Leg:
    """The sightings of one call leg in time order."""

    caller_tag: str
    sightings: list[Sighting] = field(default_factory=list)

    def requester(self, one: Sighting) -> str:
        """Side whose transaction the message belongs to."""
        return CALLER if one.from_tag == self.caller_tag else CALLEE

    def sender(self, one: Sighting) -> str:
        """Side that sent the message."""
        return CALLER if one.request == (one.from_tag == self.caller_tag) else CALLEE


@dataclass(slots=True)
class _Hop:
    sightings: list[Sighting] = field(default_factory=list)
    hosts: set[str] = field(default_factory=set)
    announced: dict[tuple[object, ...], frozenset[tuple[str, int]]] = field(default_factory=dict)
    """media addresses by message"""

    def add(self, one: Sighting) -> None:
        self.sightings.append(one)
        self.hosts.update((one.row.source, one.row.destination))
        if one.description is not None:
            places = frozenset((section.address, section.port) for section in one.description.media)
            self.announced.setdefault(one.identity()[:-1], places)

    def absorb(self, other: "_Hop") -> None:
        self.sightings += other.sightings
        self.hosts |= other.hosts
        self.announced = other.announced | self.announced

    def relation(self, other: "_Hop") -> bool | None:
        """True where a message has the same media on both, False where every one differs, None where none is shared."""
        shared = [key for key in other.announced if key in self.announced]
        return any(self.announced[key] == other.announced[key] for key in shared) if shared else None


def legs_of(sightings: Sequence[Sighting]) -> list[Leg]:
    """Call legs of the sightings of one Call-ID, which come in time order."""
    if not any(one.method in CALL_MARKS for one in sightings):
        return []
    return [leg for dialogs in _by_caller(sightings) for leg in _by_media(dialogs)]


def _by_caller(sightings: Sequence[Sighting]) -> list[Leg]:
    """One for every tag that begins dialogs; the other side may have many, where the call forks (section 12.1)."""
    legs: dict[str, Leg] = {}
    for one in sightings:
        leg = legs.get(one.from_tag) or legs.get(one.to_tag)
        if leg is None:
            leg = legs[one.from_tag] = Leg(one.from_tag)
        leg.sightings.append(one)
    return [leg for leg in legs.values() if any(one.method in CALL_MARKS for one in leg.sightings)]


def _by_media(leg: Leg) -> list[Leg]:
    hops = _hops(leg.sightings)
    if not 1 < len(hops) <= MAX_HOPS:
        return [leg]
    groups: list[_Hop] = []
    silent: list[_Hop] = []
    for hop in hops:
        relations = [group.relation(hop) for group in groups]
        if True in relations:
            groups[relations.index(True)].absorb(hop)
        elif hop.announced and (False in relations or not groups):
            groups.append(hop)
        else:
            silent.append(hop)
    if len(groups) < 2:
        return [leg]
    for hop in silent:
        max(groups, key=lambda group: len(group.hosts & hop.hosts)).absorb(hop)
    return [Leg(leg.caller_tag, sorted(group.sightings, key=lambda one: one.time_ns)) for group in groups]


def _hops(sightings: Sequence[Sighting]) -> list[_Hop]:
    """Sightings by hop: by the two hosts, or by transaction where answers come by another port (section 18.2.2)."""
    by_pair: dict[frozenset[str], _Hop] = {}
    by_transaction: dict[tuple[str, int, str], _Hop] = {}
    for one in sightings:
        transaction = (one.branch, one.number, one.method)
        hop = by_transaction.get(transaction) if one.branch else None
        if hop is None:
            hop = by_pair.setdefault(frozenset((one.row.source, one.row.destination)), _Hop())
            by_transaction[transaction] = hop
        hop.add(one)
    return list(by_pair.values())
