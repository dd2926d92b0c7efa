"""What the signalling room hands on: messages as rows, calls, and the media that was agreed at any time."""

from dataclasses import dataclass, field

from rtpaudit.signalling.payload_types import Encoding
from rtpaudit.signalling.sdp import NAN, NULL_ADDRESSES, Candidate, MediaSection, SessionDescription

CALLER, CALLEE = "caller", "callee"


@dataclass(slots=True)
class SignallingMessage:
    """One message as it was seen at one place. A row of the signalling table."""

    time_ns: int
    source: str
    """address and port"""
    destination: str
    protocol: str
    """SIP, MGCP or H.248"""
    transport: str
    """UDP, TCP or WebSocket"""
    message: str
    """method of a request, status code and reason of a response"""
    call_id: str
    cseq: str = ""
    status_code: int | None = None
    capture: str = ""
    frame: int = 0
    """the one that ends the message"""
    first_frame: int = 0
    """the one that begins it, where it came over TCP and that is known"""
    flow: int = -1
    target: str = ""
    """URI or endpoint that a request names; may identify a person"""
    note: str = ""
    """what the header fields add: why it ended, where it goes on"""
    description: SessionDescription | None = None
    repeated: bool = False
    """a retransmission of a message seen before between the same two addresses"""
    call: int | None = None
    """place of its call among those of the recording, None where it belongs to none"""

    @property
    def line(self) -> str:
        """The message in one line."""
        media = [section_line(one) for one in self.description.media] if self.description else []
        return "; ".join(part for part in (f"{self.message} {self.target}".rstrip(), self.note, *media) if part)

    @property
    def impersonal_line(self) -> str:
        """The same without anything that names a person, a number or an address."""
        media = [section_line(one, address=False) for one in self.description.media] if self.description else []
        start = str(self.status_code) if self.status_code is not None else self.message
        return "; ".join((start, *media))


def section_line(section: MediaSection, address: bool = True) -> str:
    """A media section in words: kind, place, encodings, direction."""
    if not section.port:
        return f"{section.kind} declined"
    place = f" {section.address}:{section.port}" if address else ""
    known = (section.encodings[number].name for number in section.payload_types if number in section.encodings)
    coded = " ".join(dict.fromkeys(known)) or " ".join(section.formats[:4])
    how = " encrypted" if section.encrypted else ""
    return f"{section.kind}{place} {coded} {section.direction}{how}"


@dataclass(slots=True)
class Party:
    """One side of a call as the signalling names it."""

    user: str = ""
    """user part of its URI, else its host"""
    display_name: str = ""
    uri: str = ""
    asserted_identity: str = ""
    """URI that the network vouches for (P-Asserted-Identity, RFC 3325)"""
    user_agent: str = ""
    address: str = ""
    """address and port of its signalling, at the hop that was seen first"""


@dataclass(slots=True)
class MediaTerm:
    """One media section that one side announced, with the time for which it was in force.

    The side *receives* at the address: media towards it comes from the other side.
    """

    from_ns: int
    until_ns: int | None
    """None where it held until the call ended"""
    side: str
    """``caller`` or ``callee``; "" for a gateway that is told what to do (MGCP, H.248)"""
    kind: str
    """audio, video or image"""
    address: str
    port: int
    protocol: str
    direction: str
    """as this side announced it: ``sendonly`` says that it does not want to receive"""
    encodings: dict[int, Encoding]
    packet_time_ms: float = NAN
    rtcp_address: str = ""
    rtcp_port: int = 0
    rtcp_mux: bool = False
    encrypted: bool = False
    early: bool = False
    """announced by a callee that had not answered yet"""
    fork: str = ""
    """tag of the callee that announced it, where several may (forking)"""
    section: int = 0
    """place of the m= line, counted from 0"""
    candidates: tuple[Candidate, ...] = ()
    message: SignallingMessage | None = None
    """that announced it"""
    call_id: str = ""
    connection: str = ""
    """connection or termination of a gateway"""

    @property
    def receives(self) -> bool:
        """Whether this side asked for media."""
        return self.direction in ("sendrecv", "recvonly") and self.address not in NULL_ADDRESSES

    def holds_at(self, time_ns: int) -> bool:
        """Whether the term was in force at a time."""
        return self.from_ns <= time_ns and (self.until_ns is None or time_ns < self.until_ns)


def media_term(section: MediaSection, from_ns: int, side: str, message: SignallingMessage, place: int) -> MediaTerm:
    """The term that begins when a section is announced."""
    return MediaTerm(
        from_ns=from_ns,
        until_ns=None,
        side=side,
        kind=section.kind,
        address=section.address,
        port=section.port,
        protocol=section.protocol,
        direction=section.direction,
        encodings=section.encodings,
        packet_time_ms=section.packet_time_ms,
        rtcp_address=section.rtcp_address,
        rtcp_port=section.rtcp_port,
        rtcp_mux=section.rtcp_mux,
        encrypted=section.encrypted,
        section=place,
        candidates=section.candidates,
        message=message,
        call_id=message.call_id,
    )


@dataclass(slots=True)
class Hold:
    """A time during which one side kept the other waiting (RFC 3264 section 8.4)."""

    from_ns: int
    until_ns: int | None
    """None where it lasted until the call ended"""
    side: str
    """who put the other on hold"""


@dataclass(slots=True)
class Transfer:
    """A wish to pass the call on (REFER, RFC 3515)."""

    at_ns: int
    side: str
    """who asked for it"""
    target: str
    """URI"""
    replaces: str = ""
    """Call-ID of the call to be taken over (RFC 3891): an attended transfer"""
    status_code: int | None = None
    """last word on how it went: NOTIFY, else the answer to REFER"""


@dataclass(slots=True)
class SipCall:
    """One call leg."""

    call_id: str
    caller: Party
    callee: Party
    started_ns: int
    answered_ns: int | None
    released_ns: int | None
    """BYE, else CANCEL; None where the capture shows neither"""
    ended_ns: int
    """BYE, else the last message"""
    outcome: str
    """answered, cancelled, refused, failed or no reply"""
    status_code: int | None
    setup_delay_s: float
    release_by: str
    reason: str = ""
    """text of the Reason header field, else of the status"""
    q850_cause: int | None = None
    """RFC 3326, ITU-T Q.850"""
    began_before: bool = False
    """the capture does not show the first INVITE"""
    media: list[MediaTerm] = field(default_factory=list)
    holds: list[Hold] = field(default_factory=list)
    transfers: list[Transfer] = field(default_factory=list)
    diversions: list[str] = field(default_factory=list)
    """URIs that the call was sent on from (Diversion, RFC 5806; History-Info, RFC 7044), the latest first"""
    referred_by: str = ""
    replaces: str = ""
    """Call-ID of the call that this one took over (RFC 3891)"""
    session_ids: frozenset[str] = frozenset()
    """RFC 7989, both halves"""
    fax: bool = False
    """T.38 was agreed, or asked for within the call"""
    forks: int = 0
    """callees that the call rang at, as far as the capture shows"""
    messages: list[SignallingMessage] = field(default_factory=list)
    first_frame: int = 0

    def terms_at(self, time_ns: int) -> list[MediaTerm]:
        """What was in force at a time."""
        return [term for term in self.media if term.holds_at(time_ns)]
