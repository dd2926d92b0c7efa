"""Offers and answers of one leg come in (RFC 3264), the media in force over time and the times on hold go out.

Where a side receives is known from its own announcement, offer or answer, from the moment it is sent (RFC 3264 sections
5.1 and 6.1). An offer may stand in INVITE, UPDATE (RFC 3311), PRACK (RFC 3262), or in a response where the INVITE had
none; its answer stands in the response, or in ACK or PRACK.
"""

from collections.abc import Iterable
from dataclasses import dataclass, field, replace

from rtpaudit.signalling.calls import CALLEE, CALLER, Hold, MediaTerm, media_term
from rtpaudit.signalling.legs import Leg
from rtpaudit.signalling.sdp import MediaSection, SessionDescription
from rtpaudit.signalling.sightings import Sighting

MAX_TERMS = 4096
"""A leg that changes its media more often than this is a flood, of which the first part is kept."""

CHALLENGES = frozenset({401, 407})


@dataclass(slots=True)
class MediaHistory:
    """What one leg agreed on, as it is read message by message."""

    leg: Leg
    terms: list[MediaTerm] = field(default_factory=list)
    holds: list[Hold] = field(default_factory=list)
    fax: bool = False
    _open: dict[tuple[str, str], dict[int, MediaTerm]] = field(default_factory=dict)
    """terms in force by side and callee's tag, then by place of the m= line"""
    _offers: dict[tuple[str, int, str], tuple[Sighting, dict[int, MediaTerm]]] = field(default_factory=dict)
    """request with an offer, and what its side had announced before"""
    _late_offer: Sighting | None = None
    _answered: str | None = None
    """tag of the callee whose 2xx came first"""
    _holding: dict[str, Hold] = field(default_factory=dict)

    def read(self, sightings: Iterable[Sighting]) -> None:
        """Goes through the messages of the leg, each once, in time order."""
        for one in sightings:
            if one.request:
                self._request(one)
            elif one.method in ("INVITE", "UPDATE", "PRACK"):
                self._response(one)

    def _request(self, one: Sighting) -> None:
        if one.description is None or len(self.terms) > MAX_TERMS:
            return
        side, fork = self.leg.sender(one), self._fork(one)
        before = dict(self._open.get((side, fork), {}))
        if one.method in ("ACK", "PRACK") and self._late_offer is not None:
            self._pair(self._late_offer, one)
            self._late_offer = None
        elif one.method != "ACK":
            self._offers[self._transaction(one)] = (one, before)
            self.fax |= bool(one.to_tag) and any(section.fax and section.port for section in one.description.media)
        self._announce(one, side, fork, early=False)

    def _response(self, one: Sighting) -> None:
        offered = self._offers.get(self._transaction(one))
        initial = one.method == "INVITE" and self.leg.requester(one) == CALLER and self._answered in (None, one.to_tag)
        if one.status >= 300:
            if offered is not None and one.status not in CHALLENGES and one.status >= 400:
                self._take_back(one, *offered)
            return
        early = initial and one.status < 200 and self._answered is None
        if initial and one.status >= 200:
            self._confirm(one)
        if one.description is None or len(self.terms) > MAX_TERMS:
            return
        self._announce(one, self.leg.sender(one), self._fork(one), early)
        if offered is not None:
            self._pair(offered[0], one)
        elif one.method == "INVITE":
            self._late_offer = one

    def _announce(self, one: Sighting, side: str, fork: str, early: bool) -> None:
        assert one.description is not None
        current = self._open.setdefault((side, fork), {})
        for place, section in enumerate(one.description.media):
            term = media_term(section, one.time_ns, side, one.row, place)
            term.early, term.fork = early, fork
            self._succeed(current, place, term if section.port else None, one.time_ns)
        for place in [place for place in current if place >= len(one.description.media)]:
            self._succeed(current, place, None, one.time_ns)

    def _succeed(self, current: dict[int, MediaTerm], place: int, term: MediaTerm | None, at_ns: int) -> None:
        """Puts a term in the place of the one before, unless it says the same."""
        old = current.get(place)
        if old is not None and term is not None and _substance(old) == _substance(term):
            return
        if old is not None:
            old.until_ns = at_ns
            del current[place]
        if term is not None:
            current[place] = term
            self.terms.append(term)

    def _confirm(self, one: Sighting) -> None:
        """The first 2xx: what this callee announced early holds on, what others did ends (RFC 3261, 13.2.2.4)."""
        self._answered = self._answered if self._answered is not None else one.to_tag
        for (side, fork), current in self._open.items():
            for place, term in list(current.items()):
                if side == CALLEE and fork != self._answered:
                    self._succeed(current, place, None, one.time_ns)
                elif term.early:
                    confirmed = replace(term, from_ns=one.time_ns, early=False, message=one.row)
                    self._succeed(current, place, confirmed, one.time_ns)

    def _take_back(self, one: Sighting, offer: Sighting, before: dict[int, MediaTerm]) -> None:
        """A refused offer changes nothing (RFC 3261, 14.1): what held before holds again."""
        current = self._open[(self.leg.sender(offer), self._fork(offer))]
        for place in list(current):
            old = before.get(place)
            again = replace(old, from_ns=one.time_ns, until_ns=None) if old is not None else None
            self._succeed(current, place, again, one.time_ns)

    def _pair(self, offer: Sighting, answer: Sighting) -> None:
        assert offer.description is not None
        assert answer.description is not None
        offered, answered = offer.description.media, answer.description.media
        current = self._open.get((self.leg.sender(offer), self._fork(offer)), {})
        for place, section in enumerate(answered):
            if not section.port and place in current:
                self._succeed(current, place, None, answer.time_ns)
        self.fax |= any(a.fax and a.port and b.fax and b.port for a, b in zip(offered, answered, strict=False))
        pair = _audio(offer.description, answer.description)
        if pair is not None:
            self._note_hold(offer, answer, *pair)

    def _note_hold(self, offer: Sighting, answer: Sighting, offered: MediaSection, answered: MediaSection) -> None:
        side = self.leg.sender(offer)
        other = CALLEE if side == CALLER else CALLER
        self._set_hold(side, offered.held, offer, answer)
        if not offered.held or offered.direction == "sendonly":
            self._set_hold(other, answered.held, offer, answer)
        elif not answered.held:
            # An answer that would still receive holds nobody; to an offer of nothing it can but say inactive.
            self._set_hold(other, False, offer, answer)

    def _set_hold(self, side: str, held: bool, offer: Sighting, answer: Sighting) -> None:
        running = self._holding.get(side)
        if held and running is None:
            self._holding[side] = Hold(offer.time_ns, None, side)
            self.holds.append(self._holding[side])
        elif not held and running is not None:
            running.until_ns = answer.time_ns
            del self._holding[side]

    def _transaction(self, one: Sighting) -> tuple[str, int, str]:
        return self.leg.requester(one), one.number, one.method

    def _fork(self, one: Sighting) -> str:
        if self.leg.sender(one) == CALLER:
            return ""
        return one.from_tag if one.request else one.to_tag


def _substance(term: MediaTerm) -> tuple[object, ...]:
    """What has to differ for a new term to begin."""
    packet_time = term.packet_time_ms if term.packet_time_ms > 0 else 0.0
    place = (term.kind, term.address, term.port, term.rtcp_address, term.rtcp_port, term.rtcp_mux)
    return (*place, term.protocol, term.direction, packet_time, term.encrypted, term.early, term.encodings)


def _audio(offer: SessionDescription, answer: SessionDescription) -> tuple[MediaSection, MediaSection] | None:
    """The first audio stream that both sides want."""
    for offered, answered in zip(offer.media, answer.media, strict=False):
        if offered.kind == "audio" and offered.port and answered.port:
            return offered, answered
    return None
