"""Call legs come in, conversations go out: which legs carry the same words through a relay, a gateway or a proxy."""

from collections import defaultdict
from collections.abc import Iterable, Sequence

from rtpaudit.signalling.calls import SipCall
from rtpaudit.units import NS_PER_S

FOLLOWS_WITHIN_NS = 4 * NS_PER_S
"""A relay sends its own INVITE at most so long after the one it got. Common practice: T1 * 8 of RFC 3261 section 17."""
TOGETHER_WITHIN_NS = NS_PER_S
"""Answer and end travel along a chain of legs within this time."""
NUMBER_DIGITS = 7
"""So many last digits make two numbers equal whatever prefix a gateway puts before them. Common practice."""
RECENT = 64
"""Calls of the same parties that one is compared with."""


def conversations(calls: Sequence[SipCall]) -> list[int]:
    """Number of the conversation of each call, counted from 0 by its first leg.

    Legs belong together by a Session-ID in common (RFC 7989), by a Call-ID in common at the same time, or by the same
    parties, times and fate where one leg begins soon after the other and does not run between the same two hosts.
    """
    root = list(range(len(calls)))

    def find(place: int) -> int:
        while root[place] != place:
            root[place] = root[root[place]]
            place = root[place]
        return place

    def unite(one: int, other: int) -> None:
        first, second = sorted((find(one), find(other)))
        root[second] = first

    seen: dict[object, list[int]] = defaultdict(list)
    for place in sorted(range(len(calls)), key=lambda place: calls[place].started_ns):
        for evidence in _certain(calls[place]):
            for other in seen[evidence][-RECENT:]:
                if _overlap(calls[other], calls[place]):
                    unite(other, place)
            seen[evidence].append(place)
        parties = ("parties", _number(calls[place].caller.user), _number(calls[place].callee.user))
        for other in reversed(seen[parties][-RECENT:]):
            if _next_leg(calls[other], calls[place]):
                unite(other, place)
                break
        seen[parties].append(place)
    names: dict[int, int] = {}
    return [names.setdefault(find(place), len(names)) for place in range(len(calls))]


def _certain(call: SipCall) -> Iterable[object]:
    return [("call", call.call_id), *(("session", one) for one in call.session_ids)]


def _overlap(one: SipCall, other: SipCall) -> bool:
    return one.started_ns <= other.ended_ns and other.started_ns <= one.ended_ns


def _next_leg(one: SipCall, other: SipCall) -> bool:
    """Whether ``other``, which began later, is the next leg of ``one``."""
    ends, other_ends = _hosts(one), _hosts(other)
    if ends == other_ends or one.outcome != other.outcome or one.began_before or other.began_before:
        return False
    # In a row of legs the relay in the middle calls on; it need not use the same address on both sides.
    chained = ends[1] == other_ends[0] or not set(ends) & set(other_ends)
    soon = 0 <= other.started_ns - one.started_ns <= FOLLOWS_WITHIN_NS
    if one.answered_ns is not None:
        soon &= other.started_ns <= one.answered_ns + TOGETHER_WITHIN_NS
    return chained and soon and _near(one.answered_ns, other.answered_ns) and _near(one.released_ns, other.released_ns)


def _hosts(call: SipCall) -> tuple[str, str]:
    return call.caller.address.rpartition(":")[0], call.callee.address.rpartition(":")[0]


def _near(one: int | None, other: int | None) -> bool:
    if one is None or other is None:
        return one is other
    return abs(one - other) <= TOGETHER_WITHIN_NS


def _number(user: str) -> str:
    digits = "".join(letter for letter in user if letter.isdigit())
    plain = all(letter in "+-. ()" or letter.isdigit() for letter in user)
    return digits[-NUMBER_DIGITS:] if plain and len(digits) >= NUMBER_DIGITS else user.casefold()
