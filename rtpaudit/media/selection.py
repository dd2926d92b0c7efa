"""Which calls somebody means: by party, by time, by id; and where none is meant, which ones come nearest."""

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from datetime import tzinfo
from heapq import nsmallest
from ipaddress import ip_address

from rtpaudit.errors import NearCall, NothingChosen, UnusableArguments
from rtpaudit.media.calls import Call
from rtpaudit.media.moments import Moment, parse_moment
from rtpaudit.signalling.calls import Party

NEAREST = 5
"""calls that are named where none was meant"""
NUMBER_DIGITS = 6
"""from so many digits on, numbers are compared without what a trunk or a country puts before them (common practice)"""

_OUR_ID = re.compile(r"[cC](\d{1,9})", re.ASCII)
_SIGNS = frozenset("+ ().-/")
"""what stands between the digits of a number, or before them"""


@dataclass(frozen=True, slots=True)
class Selection:
    """What is known of the calls that are wanted; a call is meant when everything that is said here fits it.

    Raises
    ------
    UnusableArguments
        Where a time is none, or a text is empty.
    """

    parties: tuple[str, ...] = ()
    """number, URI, name or address: each has to be found in the call"""
    at: str = ""
    """time of day, time, or day: the call was going on then"""
    calls: tuple[str, ...] = ()
    """ids of this audit (``c07``) or Call-IDs: the call is one of them"""
    zone: tzinfo | None = None
    """in which ``at`` is meant; None for the machine's own"""
    moment: Moment | None = field(init=False, default=None)

    def __post_init__(self) -> None:
        if not all(text.strip() for text in (*self.parties, *self.calls)):
            raise UnusableArguments("a party or a call to look for is empty")
        if self.at:
            object.__setattr__(self, "moment", parse_moment(self.at, self.zone))

    def __bool__(self) -> bool:
        return bool(self.parties or self.calls or self.moment)


def chosen(calls: Sequence[Call], wanted: Selection) -> list[Call]:
    """The calls that are meant, in their order.

    Raises
    ------
    NothingChosen
        If there are none, or one that is named is not there; it holds those that come nearest.
    """
    ids = [_Id(text) for text in wanted.calls]
    missing = [one.text for one in ids if not any(map(one.is_of, calls))]
    parties = [_PartyText(text) for text in wanted.parties]
    faults = [_faults(call, wanted.moment, ids, parties) for call in calls]
    found = [call for call, fault in zip(calls, faults, strict=True) if not fault.unmet]
    if found and not missing:
        return found
    ranked = nsmallest(NEAREST, range(len(calls)), key=lambda k: faults[k].rank(calls[k], missing, parties))
    raise NothingChosen(missing, [_near(calls[k]) for k in ranked])


def _near(call: Call) -> NearCall:
    return NearCall(call.id, call.caller, call.callee, call.started_ns, call.ended_ns)


@dataclass(frozen=True, slots=True)
class _Faults:
    """What of the wanted does not fit a call."""

    unmet: int
    away_ns: int
    strange: tuple[int, ...]
    """places of the parties that were not found"""

    def rank(self, call: Call, missing: Sequence[str], parties: Sequence["_PartyText"]) -> tuple[float, ...]:
        likeness = max((_likeness(text, one) for text in missing for one in _ids(call)), default=0.0)
        likeness += sum(parties[k].likeness(call) for k in self.strange)
        return self.unmet, self.away_ns, -likeness, call.started_ns


def _faults(call: Call, moment: Moment | None, ids: Sequence["_Id"], parties: Sequence["_PartyText"]) -> _Faults:
    away = moment.distance_ns(call.started_ns, call.ended_ns) if moment else 0
    strange = tuple(k for k, party in enumerate(parties) if not party.is_in(call))
    other = bool(ids) and not any(one.is_of(call) for one in ids)
    return _Faults(len(strange) + (away > 0) + other, away, strange)


class _Id:
    """The id of a call, ours or that of its dialog."""

    def __init__(self, text: str) -> None:
        self.text = text.strip()
        ours = _OUR_ID.fullmatch(self.text)
        self._number = int(ours[1]) if ours else -1

    def is_of(self, call: Call) -> bool:
        if self._number >= 0 and int(call.id[1:] or -1) == self._number:
            return True
        return call.signalled is not None and call.signalled.call_id == self.text


class _PartyText:
    """What somebody says of a party, ready to be looked for."""

    def __init__(self, text: str) -> None:
        self._folded = text.strip().casefold()
        self._address = _address(self._folded)
        self._digits = _number(self._folded)

    def is_in(self, call: Call) -> bool:
        hosts = _hosts(call)
        if self._address:
            return self._address in hosts
        names = [name.casefold() for name in _names(call)]
        return any(self._folded in one for one in (*names, *hosts)) or any(map(self._is_number, names))

    def _is_number(self, name: str) -> bool:
        """Whether a name is the number, or one of them the end of the other."""
        digits = _number(_user(name)) if len(self._digits) >= NUMBER_DIGITS else ""
        return len(digits) >= NUMBER_DIGITS and (self._digits in digits or self._digits.endswith(digits))

    def likeness(self, call: Call) -> float:
        return max((_likeness(self._folded, one) for one in (*_names(call), *_hosts(call))), default=0.0)


def _names(call: Call) -> Iterator[str]:
    """All that the parties of a call are called."""
    yield from (call.caller, call.callee)
    said = call.signalled
    if said is not None:
        for party in (said.caller, said.callee):
            yield from (party.user, party.display_name, party.uri, party.asserted_identity)
        yield from said.diversions
        yield said.referred_by
        yield from (transfer.target for transfer in said.transfers)


def _hosts(call: Call) -> set[str]:
    """Addresses of signalling and media, and what stands for a party where nothing was signalled."""
    hosts = {call.caller, call.callee} | {
        host for stream in call.streams for host in (stream.source, stream.destination)
    }
    if call.signalled is not None:
        hosts |= {term.address for term in call.signalled.media}
        hosts |= {host_of(party) for party in (call.signalled.caller, call.signalled.callee)}
    return hosts


def host_of(party: Party) -> str:
    """Address of a party's signalling without its port."""
    return party.address.rpartition(":")[0].strip("[]")


def _ids(call: Call) -> tuple[str, ...]:
    return (call.id, call.signalled.call_id) if call.signalled else (call.id,)


def _address(text: str) -> str:
    try:
        return str(ip_address(text.strip("[]")))
    except ValueError:
        return ""


def _user(uri: str) -> str:
    """What may be a number in a URI, or in a name that is none."""
    return uri.removeprefix("sips:").removeprefix("sip:").removeprefix("tel:").partition("@")[0].partition(";")[0]


def _number(text: str) -> str:
    """Digits of a number without the zeros of a trunk or of an international call before it, "" where it is none."""
    digits = "".join(sign for sign in text if sign not in _SIGNS)
    if not (digits.isascii() and digits.isdigit()):
        return ""
    return digits.lstrip("0") if len(digits) > NUMBER_DIGITS else digits


def _likeness(one: str, other: str) -> float:
    """Share of the pairs of letters that two texts have in common (Dice's coefficient); 1 where they are the same."""
    a, b = _pairs(one), _pairs(other)
    return 2.0 * len(a & b) / (len(a) + len(b)) if a and b else 0.0


def _pairs(text: str) -> set[str]:
    framed = f"^{text.casefold()[:256]}$"
    return {framed[k : k + 2] for k in range(len(framed) - 1)}
