"""Octets in, a session description out (RFC 4566): where each side receives which media, coded how."""

import re
from dataclasses import dataclass, field
from functools import lru_cache
from ipaddress import ip_address

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.grammar import printable
from rtpaudit.signalling.payload_types import STATIC, Encoding, encoding

NAN = float("nan")
MAX_OCTETS = 131_072
MAX_SECTIONS = 64
MAX_FORMATS = 128
MAX_CANDIDATES = 64

NULL_ADDRESSES = ("0.0.0.0", "::")
"""hold as RFC 2543 had it; RFC 3264 section 8.4 still has it understood"""
DIRECTIONS = frozenset({"sendrecv", "sendonly", "recvonly", "inactive"})

_RTPMAP = re.compile(r"([0-9]{1,3})\s+([^\s/]{1,64})\s*/\s*([0-9]{1,6})(?:\s*/\s*([0-9]{1,3}))?")
_MILLISECONDS = re.compile(r"([0-9]{1,4}(?:\.[0-9]{1,3})?)\s*")
_PORT = re.compile(r"([0-9]{1,5})(?:/([0-9]{1,3}))?")


@dataclass(frozen=True, slots=True)
class Origin:
    """The o= line (section 5.2): which session, and which version of its description."""

    user: str = ""
    session_id: str = ""
    version: str = ""
    address: str = ""


@dataclass(frozen=True, slots=True)
class Candidate:
    """An ICE candidate (RFC 8839 section 5.1, from memory)."""

    component: int
    """1 media, 2 RTCP"""
    transport: str
    address: str
    port: int
    kind: str
    """host, srflx, prflx or relay"""
    related_address: str = ""
    related_port: int = 0


@dataclass(frozen=True, slots=True)
class MediaSection:
    """One m= line with what is said of it, session-wide statements filled in."""

    kind: str
    """audio, video, image, application, message, text"""
    port: int
    """0 where the section is declined or taken back (RFC 3264 sections 6 and 8.2)"""
    protocol: str
    """as in ``RTP/SAVP``, in upper case"""
    address: str
    formats: tuple[str, ...]
    payload_types: tuple[int, ...] = ()
    """in the order of preference"""
    encodings: dict[int, Encoding] = field(default_factory=dict)
    """of every payload type whose meaning is known: ``a=rtpmap``, else RFC 3551"""
    format_parameters: dict[int, str] = field(default_factory=dict)
    packet_time_ms: float = NAN
    max_packet_time_ms: float = NAN
    direction: str = "sendrecv"
    rtcp_address: str = ""
    rtcp_port: int = 0
    """RFC 3605, else one above ``port`` (RFC 3550 section 11); 0 where there is no RTCP"""
    rtcp_mux: bool = False
    """RTCP on the port of the media is offered or taken (RFC 5761)"""
    candidates: tuple[Candidate, ...] = ()
    crypto_suites: tuple[str, ...] = ()
    """of ``a=crypto`` (RFC 4568); the keys are not kept"""
    fingerprint: bool = False
    """a certificate is announced, so keys come by DTLS (RFC 5763, from memory)"""

    @property
    def held(self) -> bool:
        """Whether this side asks the other not to send (RFC 3264 section 8.4)."""
        return self.direction in ("sendonly", "inactive") or self.address in NULL_ADDRESSES

    @property
    def encrypted(self) -> bool:
        """Whether SRTP is announced: by the protocol (RFC 3711, RFC 5764) or by a key beside it."""
        return "SAVP" in self.protocol or bool(self.crypto_suites) or self.fingerprint

    @property
    def fax(self) -> bool:
        """Whether this is T.38 fax (image/t38 over UDPTL, ITU-T T.38 Annex D)."""
        return self.kind == "image" or any(name.lower() == "t38" for name in self.formats)

    def types_of(self, name: str) -> tuple[int, ...]:
        """Payload types of one encoding, such as ``telephone-event`` or ``CN``."""
        return tuple(number for number, one in self.encodings.items() if one.name == name)


@dataclass(frozen=True, slots=True)
class SessionDescription:
    """What one side announced."""

    origin: Origin
    name: str
    media: tuple[MediaSection, ...]

    def first(self, kind: str) -> MediaSection | None:
        """First section of a kind that is not declined."""
        return next((one for one in self.media if one.kind == kind and one.port), None)


@dataclass(slots=True)
class _Level:
    """Lines of the session, or of one m= line, as they come."""

    media: str = ""
    address: str = ""
    attributes: dict[str, list[str]] = field(default_factory=dict)

    def attribute(self, name: str) -> str:
        found = self.attributes.get(name)
        return found[0] if found else ""


def parse_description(octets: bytes) -> SessionDescription:
    """A session description out of a body (RFC 4566 section 5); lines that make no sense are passed over.

    Raises
    ------
    MalformedPacket
        Where there is neither a version nor any media line.
    """
    if len(octets) > MAX_OCTETS:
        raise MalformedPacket(f"session description of {len(octets)} octets")
    text = printable(octets.decode("utf-8", "backslashreplace").replace("\r\n", "\n").replace("\r", "\n"))
    session = _Level()
    sections: list[_Level] = []
    origin, name, seen = Origin(), "", False
    level = session
    for line in text.split("\n"):
        key, equals, value = line.partition("=")
        key, value = key.strip(), value.strip()
        if not equals or len(key) != 1:
            continue
        if key == "a":
            attribute, _, argument = value.partition(":")
            level.attributes.setdefault(attribute.strip().lower(), []).append(argument.strip())
        elif key == "c":
            level.address = level.address or _connection(value)
        elif key == "m":
            if len(sections) == MAX_SECTIONS:
                break
            level = _Level(value)
            sections.append(level)
        elif key == "v":
            seen = True
        elif key == "o":
            origin = _origin(value)
        elif key == "s":
            name = value
    if not seen and not sections:
        raise MalformedPacket("session description without version and media")
    media = (_media_section(level, session) for level in sections)
    return SessionDescription(origin, name, tuple(one for one in media if one is not None))


def _origin(value: str) -> Origin:
    parts = value.split()
    if len(parts) < 3:
        return Origin(*parts[:1])
    return Origin(parts[0], parts[1], parts[2], _address(parts[5]) if len(parts) > 5 else "")


def _connection(value: str) -> str:
    """Address of a c= line, or of the tail of ``a=rtcp`` (section 5.7)."""
    parts = value.split()
    return _address(parts[2]) if len(parts) > 2 else ""


@lru_cache(maxsize=4096)
def _address(text: str) -> str:
    """An address as the tables of packets write it; a host name as it stands."""
    bare = text.partition("/")[0].strip("[]")
    try:
        return str(ip_address(bare.partition("%")[0]))
    except ValueError:
        return bare.lower()


def _media_section(level: _Level, session: _Level) -> MediaSection | None:
    parts = level.media.split()
    port = _PORT.fullmatch(parts[1]) if len(parts) > 2 else None
    if port is None or int(port[1]) > 65_535:
        return None
    kind, number, protocol = parts[0].lower(), int(port[1]), parts[2].upper()
    formats = tuple(parts[3 : 3 + MAX_FORMATS])
    payload_types = _payload_types(formats) if "RTP/" in protocol else ()
    address = level.address or session.address
    rtcp_address, rtcp_port = _rtcp(level, address, number if payload_types else 0)
    return MediaSection(
        kind=kind,
        port=number,
        protocol=protocol,
        address=address,
        formats=formats,
        payload_types=payload_types,
        encodings=_encodings(level, payload_types, kind),
        format_parameters=_format_parameters(level),
        packet_time_ms=_milliseconds(level.attribute("ptime") or session.attribute("ptime")),
        max_packet_time_ms=_milliseconds(level.attribute("maxptime") or session.attribute("maxptime")),
        direction=_direction(level, session),
        rtcp_address=rtcp_address,
        rtcp_port=rtcp_port,
        rtcp_mux="rtcp-mux" in level.attributes or "rtcp-mux" in session.attributes,
        candidates=_candidates(level),
        crypto_suites=_suites(level),
        fingerprint="fingerprint" in level.attributes or "fingerprint" in session.attributes,
    )


def _payload_types(formats: tuple[str, ...]) -> tuple[int, ...]:
    return tuple(dict.fromkeys(int(one) for one in formats if one == "0" or _number(one, 127)))


def _encodings(level: _Level, payload_types: tuple[int, ...], kind: str) -> dict[int, Encoding]:
    media = "video" if kind == "video" else "audio"
    announced: dict[int, Encoding] = {}
    for value in level.attributes.get("rtpmap", ())[:MAX_FORMATS]:
        found = _RTPMAP.match(value)
        if found and int(found[1]) < 128 and int(found[3]):
            announced.setdefault(int(found[1]), encoding(found[2], int(found[3]), int(found[4] or 0), media))
    known = {number: announced.get(number) or STATIC.get(number) for number in payload_types}
    # Types that only an rtpmap names come last: some gear leaves telephone-event out of its m= line.
    return {number: one for number, one in (known | announced).items() if one is not None}


def _format_parameters(level: _Level) -> dict[int, str]:
    found: dict[int, str] = {}
    for value in level.attributes.get("fmtp", ())[:MAX_FORMATS]:
        number, _, parameters = value.partition(" ")
        if number == "0" or _number(number, 127):
            found.setdefault(int(number), parameters.strip())
    return found


def _number(text: str, highest: int = 65_535) -> int:
    """A number from 1 to ``highest``, 0 where the text is none such."""
    number = int(text) if text.isascii() and text.isdecimal() and len(text) <= 5 else 0
    return number if number <= highest else 0


def _milliseconds(value: str) -> float:
    found = _MILLISECONDS.match(value)
    return float(found[1]) if found and float(found[1]) > 0 else NAN


def _direction(level: _Level, session: _Level) -> str:
    for one in (level, session):
        if said := [name for name in one.attributes if name in DIRECTIONS]:
            return said[0]
    return "sendrecv"


def _rtcp(level: _Level, address: str, port: int) -> tuple[str, int]:
    number, _, tail = level.attribute("rtcp").partition(" ")
    if announced := _number(number):
        return _connection(tail) or address, announced
    return (address, port + 1) if 0 < port < 65_535 else ("", 0)


def _candidates(level: _Level) -> tuple[Candidate, ...]:
    found = []
    for value in level.attributes.get("candidate", ())[:MAX_CANDIDATES]:
        parts = value.split()
        if len(parts) < 8 or not _number(parts[1], 256) or not _number(parts[5]):
            continue
        extra = dict(zip(parts[8::2], parts[9::2], strict=False))
        found.append(
            Candidate(
                component=int(parts[1]),
                transport=parts[2].lower(),
                address=_address(parts[4]),
                port=int(parts[5]),
                kind=parts[7].lower(),
                related_address=_address(extra["raddr"]) if "raddr" in extra else "",
                related_port=_number(extra.get("rport", "")),
            )
        )
    return tuple(found)


def _suites(level: _Level) -> tuple[str, ...]:
    """Suites of ``a=crypto:TAG SUITE inline:KEY`` (RFC 4568 section 4)."""
    lines = (value.split(maxsplit=2) for value in level.attributes.get("crypto", ())[:MAX_FORMATS])
    return tuple(parts[1] for parts in lines if len(parts) > 1)
