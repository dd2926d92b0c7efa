"""What a dialog needs of a SIP message: the message is dropped once it is seen."""

import re
from dataclasses import dataclass

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.calls import SignallingMessage
from rtpaudit.signalling.grammar import branch_of, printable, tag_of
from rtpaudit.signalling.quality_reports import CONTENT_TYPE, QualityReport, parse_quality_report
from rtpaudit.signalling.sdp import SessionDescription, parse_description
from rtpaudit.signalling.sip import SipMessage

CALL_METHODS = frozenset({"INVITE", "ACK", "CANCEL", "BYE", "PRACK", "UPDATE", "REFER", "NOTIFY", "INFO"})
"""methods that may belong to a call; REGISTER, OPTIONS, SUBSCRIBE, MESSAGE and PUBLISH make none"""

MAX_SHOWN = 256

_KEPT = (
    *("user-agent", "server", "p-asserted-identity", "remote-party-id", "reason", "session-id"),
    *("diversion", "history-info", "refer-to", "referred-by", "replaces"),
)
_STATUS_OF_FRAGMENT = re.compile(rb"\s*SIP/2\.0[ \t]+([1-6][0-9]{2})", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Sighting:
    """One SIP message at one place and time, reduced to what calls are made of."""

    row: SignallingMessage
    method: str
    """of the request, or of the request that is answered"""
    request: bool
    number: int
    """CSeq"""
    branch: str
    """of the topmost Via: one transaction on one hop (RFC 3261 section 17)"""
    from_value: str
    to_value: str
    from_tag: str
    to_tag: str
    headers: tuple[tuple[str, str], ...]
    description: SessionDescription | None
    fragment_status: int | None = None
    """status within a message/sipfrag body (RFC 3420): how a transfer goes"""

    @property
    def status(self) -> int:
        """Status of a response, 0 for a request."""
        return self.row.status_code or 0

    @property
    def time_ns(self) -> int:
        """Arrival."""
        return self.row.time_ns

    def header(self, name: str) -> str:
        """A kept header field, "" where the message has none."""
        for key, value in self.headers:
            if key == name:
                return value
        return ""

    def identity(self) -> tuple[object, ...]:
        """What two copies of the message share, on whatever hop."""
        return (self.from_tag, self.to_tag, self.number, self.method, self.request, self.status, id(self.description))


class Reader:
    """Makes sightings and rows of messages, and keeps each string and each description once."""

    def __init__(self) -> None:
        self._strings: dict[str, str] = {}
        self._descriptions: dict[bytes, SessionDescription] = {}
        self._seen: set[int] = set()
        self.reports: list[QualityReport] = []

    def row(self, message: SipMessage, row: SignallingMessage) -> SignallingMessage:
        """Fills in what the message says of itself."""
        request = message.status_code is None
        row.message = self._once((message.method if request else message.start_line)[:MAX_SHOWN])
        row.call_id = self._once(message.call_id)
        row.cseq = self._once(f"{message.cseq_number} {message.cseq_method}")
        row.status_code = message.status_code
        row.target = self._once((message.header("refer-to") or message.request_uri)[:MAX_SHOWN])
        row.note = self._once(_note(message)[:MAX_SHOWN])
        # Of the header fields only Via and To differ where the rest is the same and the message is another.
        said = (row.message, row.cseq, row.call_id, message.header("via"), message.header("to"), message.body)
        key = hash((row.source, row.destination, *said))
        row.repeated = key in self._seen
        self._seen.add(key)
        return row

    def sighting(self, message: SipMessage, row: SignallingMessage, faults: list[str]) -> Sighting | None:
        """The sighting of a message that may belong to a call, None for any other; adds to the faults."""
        row.description, fragment_status = self._bodies(message, row, faults)
        if message.cseq_method not in CALL_METHODS:
            return None
        from_value, to_value = self._once(message.header("from")), self._once(message.header("to"))
        kept = ((name, ", ".join(message.headers[name])) for name in _KEPT if name in message.headers)
        return Sighting(
            row=row,
            method=message.cseq_method,
            request=message.status_code is None,
            number=message.cseq_number,
            branch=self._once(branch_of(message.header("via"))),
            from_value=from_value,
            to_value=to_value,
            from_tag=self._once(tag_of(from_value)),
            to_tag=self._once(tag_of(to_value)),
            headers=tuple((name, self._once(value)) for name, value in kept),
            description=row.description,
            fragment_status=fragment_status,
        )

    def _bodies(
        self, message: SipMessage, row: SignallingMessage, faults: list[str]
    ) -> tuple[SessionDescription | None, int | None]:
        description, status = None, None
        for part in message.parts() if message.body else ():
            try:
                if part.content_type == "application/sdp" and description is None:
                    description = self._description(part.octets)
                elif part.content_type == CONTENT_TYPE and not row.repeated:
                    self.reports.append(parse_quality_report(part.octets, row.time_ns, row.source))
            except MalformedPacket as error:
                faults.append(str(error))
            if part.content_type.startswith("message/sipfrag"):
                found = _STATUS_OF_FRAGMENT.match(part.octets)
                status = int(found[1]) if found else None
        return description, status

    def _description(self, octets: bytes) -> SessionDescription:
        found = self._descriptions.get(octets)
        if found is None:
            found = self._descriptions[octets] = parse_description(octets)
        return found

    def _once(self, text: str) -> str:
        return self._strings.setdefault(text, text)


def _note(message: SipMessage) -> str:
    said = [
        f"{name} {message.header(name.lower())}" for name in ("Reason", "Warning") if name.lower() in message.headers
    ]
    return printable("; ".join(said))
