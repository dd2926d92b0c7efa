"""Which media was agreed for an address at a time: the signalling's media terms, indexed by where they receive."""

from collections import defaultdict
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

from rtpaudit.decode.packets import Flows
from rtpaudit.media.meaning import Offered
from rtpaudit.signalling.calls import MediaTerm, SipCall
from rtpaudit.signalling.payload_types import Encoding
from rtpaudit.units import NS_PER_S

BEFORE_NS = 5 * NS_PER_S
"""media may overtake the message that announced it, or that message may be missing from the capture"""
AFTER_NS = 10 * NS_PER_S
"""media may go on for a while after the call ended"""

Place = tuple[str, int]
"""address and port"""


@dataclass(frozen=True, slots=True)
class Agreement:
    """One media term and the call that it belongs to."""

    term: MediaTerm
    call: SipCall | None
    """None for what a gateway was told (MGCP, H.248)"""

    def nearness(self, from_ns: int, to_ns: int) -> tuple[int, int]:
        """How well a term fits media of that time: the longer both last together the better, then the later."""
        begin, end = self.span_ns
        together = min(to_ns, end) - max(from_ns, begin)
        return together, self.term.from_ns

    @property
    def span_ns(self) -> tuple[int, int]:
        """From when until when media may flow by it."""
        end = self.term.until_ns
        if end is None:
            end = self.call.ended_ns if self.call is not None and self.call.released_ns is not None else 1 << 62
        return self.term.from_ns - BEFORE_NS, end + AFTER_NS


class Agreed:
    """All agreements of one recording."""

    def __init__(self, calls: Sequence[SipCall], gateways: Sequence[MediaTerm] = ()) -> None:
        self._at: dict[Place, list[Agreement]] = defaultdict(list)
        for call in calls:
            for term in call.media:
                self._add(Agreement(term, call))
        for term in gateways:
            self._add(Agreement(term, None))

    def _add(self, agreement: Agreement) -> None:
        term = agreement.term
        if term.port:
            self._at[term.address, term.port].append(agreement)
        for candidate in term.candidates:
            if (candidate.address, candidate.port) != (term.address, term.port):
                self._at[candidate.address, candidate.port].append(agreement)

    def at(self, place: Place, from_ns: int, to_ns: int) -> Agreement | None:
        """The agreement on media towards ``place`` that lasts longest together with that time, None where none does."""
        fitting = [one for one in self._at.get(place, ()) if one.nearness(from_ns, to_ns)[0] > 0]
        return max(fitting, key=lambda one: one.nearness(from_ns, to_ns), default=None)

    def offered(self, flows: Flows) -> Offered | None:
        """What a payload type means in a flow at a time; None where nothing at all was agreed."""
        if not self._at:
            return None
        return _once_per_flow(self, flows)

    def dialog_of(self, flows: Flows) -> Callable[[int, int], SipCall | None] | None:
        """Which dialog media of a flow belongs to at a time; None where nothing at all was agreed."""
        if not self._at:
            return None

        def dialog_of(flow: int, time_ns: int) -> SipCall | None:
            return next((found.call for found in self.at_ends(flows, flow, time_ns) if found.call is not None), None)

        return dialog_of

    def at_ends(self, flows: Flows, flow: int, time_ns: int) -> Iterable[Agreement]:
        """The agreement of whom a flow goes to, then of who sends it: a relay or a translator may have moved it."""
        for place in (
            (flows.destination_text(flow), int(flows.destination_port[flow])),
            (flows.source_text(flow), int(flows.source_port[flow])),
        ):
            found = self.at(place, time_ns, time_ns + 1)
            if found is not None:
                yield found

    def addresses(self) -> Iterable[Place]:
        """Every place at which somebody wanted to receive."""
        return self._at.keys()


def _once_per_flow(agreed: Agreed, flows: Flows) -> Callable[[int, int, int], Encoding | None]:
    def offered(flow: int, payload_type: int, time_ns: int) -> Encoding | None:
        told = (found.term.encodings.get(payload_type) for found in agreed.at_ends(flows, flow, time_ns))
        return next((one for one in told if one is not None), None)

    return offered
