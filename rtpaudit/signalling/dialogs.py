"""Sightings of SIP messages come in, calls go out (RFC 3261 sections 12 to 17): parties, times, outcome, media."""

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from rtpaudit.signalling.calls import CALLEE, CALLER, Party, SipCall, Transfer
from rtpaudit.signalling.grammar import host_of, name_address, parameters_of, printable, split_values, user_of
from rtpaudit.signalling.legs import Leg, legs_of
from rtpaudit.signalling.media_history import CHALLENGES, MediaHistory
from rtpaudit.signalling.sightings import MAX_SHOWN, Sighting
from rtpaudit.units import NS_PER_S

NAN = float("nan")
REFUSALS = frozenset({486, 600, 603})
MAX_TRANSFERS = 64

_UUID = re.compile(r"[0-9a-fA-F]{32}")
_NIL = "0" * 32
_REPLACES = re.compile(r"[?&]Replaces=([^&>]{1,512})", re.IGNORECASE)


def calls_of(sightings: Iterable[Sighting]) -> list[SipCall]:
    """The calls that the messages make, by their begin.

    Messages may come in any order. One Call-ID makes one call, or several where its tags or its media addresses tell
    legs apart.
    """
    by_call_id: dict[str, list[Sighting]] = {}
    for one in sorted(sightings, key=lambda one: one.time_ns):
        by_call_id.setdefault(one.row.call_id, []).append(one)
    legs = [leg for group in by_call_id.values() for leg in legs_of(group)]
    return sorted((_call(leg) for leg in legs), key=lambda call: call.started_ns)


@dataclass(slots=True)
class _Attempt:
    """The INVITE that asks for the call, repeated after challenges and redirects, and what came of it."""

    invites: list[Sighting]
    answer: Sighting | None
    """first 2xx"""
    final: Sighting | None
    """the answer, else the last final response that is more than a challenge or a redirect"""
    first_word: Sighting | None
    """first response that is not 100, a challenge or a redirect"""
    tags: set[str]
    """callees that answered at all"""


def _call(leg: Leg) -> SipCall:
    seen = _each_once(leg)
    attempt = _attempt(leg, seen)
    started_ns = (attempt.invites or seen)[0].time_ns
    byes = [one for one in seen if one.method == "BYE" and one.time_ns >= started_ns]
    if attempt.answer is not None:
        # Where a call forks to two answers, the caller ends the second at once (section 13.2.2.4).
        byes = [one for one in byes if attempt.answer.to_tag in (one.to_tag, one.from_tag)] or byes
    established = _established(leg, seen, attempt)
    cancels = [one for one in seen if one.method == "CANCEL"] if established is None else []
    outcome = _outcome(attempt, established is not None, bool(cancels))
    releases = byes or (cancels if outcome == "cancelled" else [])
    reason, cause = _reason([*releases, attempt.final])
    history = MediaHistory(leg)
    history.read(seen)
    first = attempt.invites[0] if attempt.invites else None
    return SipCall(
        call_id=seen[0].row.call_id,
        caller=_party(leg, seen, CALLER, attempt),
        callee=_party(leg, seen, CALLEE, attempt),
        started_ns=started_ns,
        answered_ns=_answered_ns(established) if first or attempt.answer else None,
        released_ns=releases[0].time_ns if releases else None,
        ended_ns=byes[0].time_ns if byes else leg.sightings[-1].time_ns,
        outcome=outcome,
        status_code=attempt.final.status if attempt.final else None,
        setup_delay_s=_setup_delay(attempt),
        release_by=leg.requester(releases[0]) if releases else "",
        reason=reason,
        q850_cause=cause,
        began_before=first is None,
        media=history.terms,
        holds=history.holds,
        transfers=_transfers(leg, seen),
        diversions=_diversions(first) if first else [],
        referred_by=name_address(first.header("referred-by")).uri[:MAX_SHOWN] if first else "",
        replaces=first.header("replaces").partition(";")[0].strip()[:MAX_SHOWN] if first else "",
        session_ids=_session_ids(seen),
        fax=history.fax,
        forks=len(attempt.tags),
        messages=[one.row for one in leg.sightings],
        first_frame=leg.sightings[0].row.frame,
    )


def _each_once(leg: Leg) -> list[Sighting]:
    """Messages without retransmissions and without their copies on further hops.

    Of the responses to an INVITE those count that came back on the hop where it was first seen, nearest to its sender:
    behind a forking proxy there are others that the sender never gets.
    """
    first_branch: dict[tuple[str, int], str] = {}
    for one in leg.sightings:
        if one.request and one.method == "INVITE":
            first_branch.setdefault((one.from_tag, one.number), one.branch)
    concluded = {
        (one.from_tag, one.number)
        for one in leg.sightings
        if one.method == "INVITE" and one.status >= 200 and first_branch.get((one.from_tag, one.number)) == one.branch
    }
    found: dict[tuple[object, ...], Sighting] = {}
    for one in leg.sightings:
        key = (one.from_tag, one.number)
        if one.method == "INVITE" and not one.request and key in concluded and one.branch != first_branch[key]:
            continue
        found.setdefault(one.identity(), one)
    return list(found.values())


def _attempt(leg: Leg, seen: Sequence[Sighting]) -> _Attempt:
    own = [one for one in seen if one.method == "INVITE" and leg.requester(one) == CALLER]
    invites = [one for one in own if one.request and not one.to_tag]
    numbers = {one.number for one in invites}
    responses = [one for one in own if not one.request]
    if not invites and responses and not any(one.request for one in seen[: seen.index(responses[0])]):
        # The capture began between the INVITE and its first response.
        numbers = {responses[0].number}
    begin_ns = invites[0].time_ns if invites else 0
    responses = [one for one in responses if one.number in numbers and one.time_ns >= begin_ns]
    answer = next((one for one in responses if 200 <= one.status < 300), None)
    refusals = [one for one in responses if one.status >= 300]
    final = answer or next((one for one in reversed(refusals) if not _passed_over(one)), None)
    if final is None and refusals and refusals[-1].number == max(numbers):
        final = refusals[-1]
    spoken = (one for one in responses if one.status > 100 and not _passed_over(one))
    tags = {one.to_tag for one in responses if 100 < one.status < 300 and one.to_tag}
    return _Attempt(invites, answer, final, next(spoken, None), tags)


def _passed_over(one: Sighting) -> bool:
    return one.status in CHALLENGES or 300 <= one.status < 400


def _established(leg: Leg, seen: Sequence[Sighting], attempt: _Attempt) -> Sighting | None:
    """The 2xx, or where none was captured a message that only an answered call can have."""
    if attempt.answer is not None or attempt.final is not None:
        return attempt.answer
    branches = {(one.number, one.branch) for one in attempt.invites}
    return next((one for one in seen if one.to_tag and _within_call(leg, one, branches, attempt)), None)


def _within_call(leg: Leg, one: Sighting, branches: set[tuple[int, str]], attempt: _Attempt) -> bool:
    if not attempt.invites:
        return one.method != "CANCEL"
    if one.method == "ACK":
        # The ACK of a failure repeats the branch of its INVITE, the ACK of a 2xx has its own (17.1.1.3).
        return (one.number, one.branch) not in branches
    # Before an answer the caller may end a call by BYE too, so its BYE proves nothing where responses were captured.
    return one.method in ("BYE", "INVITE") and one.request and (attempt.first_word is None or leg.sender(one) == CALLEE)


def _answered_ns(established: Sighting | None) -> int | None:
    proves_when = established is not None and (established.method == "ACK" or not established.request)
    return established.time_ns if established and proves_when else None


def _outcome(attempt: _Attempt, established: bool, cancelled: bool) -> str:
    if established:
        return "answered"
    if attempt.final is None:
        return "cancelled" if cancelled else "no reply"
    if attempt.final.status == 487:
        return "cancelled"
    return "refused" if attempt.final.status in REFUSALS else "failed"


def _setup_delay(attempt: _Attempt) -> float:
    """Session request delay [s] (RFC 6076 section 4.3), NaN where its begin or its end was not captured."""
    if not attempt.invites or attempt.first_word is None:
        return NAN
    return (attempt.first_word.time_ns - attempt.invites[0].time_ns) / NS_PER_S


def _reason(candidates: Sequence[Sighting | None]) -> tuple[str, int | None]:
    """Text and Q.850 cause of the first message that gives one (RFC 3326), else the phrase of the status."""
    text, cause = "", None
    for one in candidates:
        for value in split_values(one.header("reason")) if one else ():
            protocol, _, tail = value.partition(";")
            said = parameters_of(tail)
            if protocol.strip().upper() == "Q.850" and said.get("cause", "").isdecimal() and cause is None:
                cause = int(said["cause"][:4])
            text = text or said.get("text", "")
        if text or cause is not None:
            return printable(text)[:MAX_SHOWN], cause
    last = candidates[-1]
    return (last.row.message.partition(" ")[2] if last and last.status >= 300 else ""), None


def _party(leg: Leg, seen: Sequence[Sighting], side: str, attempt: _Attempt) -> Party:
    from_caller = next((one for one in (*attempt.invites, *seen) if one.from_tag == leg.caller_tag), None)
    if from_caller is not None:
        value = from_caller.from_value if side == CALLER else from_caller.to_value
    else:
        value = seen[0].to_value if side == CALLER else seen[0].from_value
    address = name_address(value)
    own = [one for one in seen if leg.sender(one) == side and one.status != 100 and not _passed_over(one)]
    # What a refusal says of its sender may be said by a proxy, so it counts least.
    own.sort(key=lambda one: one.status >= 300)
    first = (attempt.invites or seen)[0]
    return Party(
        user=(user_of(address.uri) or host_of(address.uri))[:MAX_SHOWN],
        display_name=address.display_name[:MAX_SHOWN],
        uri=address.uri[:MAX_SHOWN],
        asserted_identity=_asserted(own),
        user_agent=_first_said(own, "user-agent", "server"),
        address=first.row.source if leg.sender(first) == side else first.row.destination,
    )


def _first_said(sightings: Iterable[Sighting], *names: str) -> str:
    said = (one.header(name) for one in sightings for name in names)
    return next((value for value in said if value), "")[:MAX_SHOWN]


def _asserted(sightings: Sequence[Sighting]) -> str:
    value = _first_said(sightings, "p-asserted-identity") or _first_said(sightings, "remote-party-id")
    return name_address(next(split_values(value), "")).uri[:MAX_SHOWN]


def _diversions(invite: Sighting) -> list[str]:
    """Where the call was sent on from: Diversion, else History-Info but for its last entry, which is the target."""
    if diverted := invite.header("diversion"):
        return [name_address(value).uri[:MAX_SHOWN] for value in split_values(diverted)]
    entries = [name_address(value).uri[:MAX_SHOWN] for value in split_values(invite.header("history-info"))]
    return entries[-2::-1]


def _session_ids(seen: Sequence[Sighting]) -> frozenset[str]:
    """Identifiers that both ends chose (RFC 7989 section 5, from memory); the nil one says nothing."""
    values = {one.header("session-id") for one in seen}
    found = {uuid.lower() for value in values for uuid in _UUID.findall(value)}
    return frozenset(found - {_NIL})


def _transfers(leg: Leg, seen: Sequence[Sighting]) -> list[Transfer]:
    found: list[Transfer] = []
    for one in seen:
        if one.request and one.method == "REFER" and len(found) < MAX_TRANSFERS:
            target = name_address(one.header("refer-to")).uri
            replaced = _REPLACES.search(target)
            call_id = user_of(f"sip:{replaced[1]}@h").partition(";")[0] if replaced else ""
            plain = target.partition("?")[0][:MAX_SHOWN]
            found.append(Transfer(one.time_ns, leg.sender(one), plain, call_id[:MAX_SHOWN]))
        elif found and one.method == "REFER" and not one.request and one.status >= 200:
            found[-1].status_code = one.status
        elif found and one.request and one.fragment_status is not None:
            found[-1].status_code = one.fragment_status
    return found
