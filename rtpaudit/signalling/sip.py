"""Octets in, a SIP message out (RFC 3261 section 7): start line, header fields, body and its parts."""

import re
from dataclasses import dataclass
from itertools import islice

from rtpaudit.errors import MalformedPacket
from rtpaudit.signalling.grammar import METHODS, TOKEN, header_name, printable, split_values

MAX_HEAD_OCTETS = 65_536
MAX_START_LINE = 8192
MAX_HEADER_LINES = 1024
MAX_PARTS = 32
MAX_DEPTH = 4
MAX_CSEQ = 1 << 32

_HEAD_END = re.compile(rb"\r?\n\r?\n")
_FOLD = re.compile(r"\r?\n[ \t]+")
_BLANK = b"\r\n\x00 \t"
_LINE_END = ord("\n")
_SIP_FIRST = re.compile(
    rb"[\r\n]{0,64}(?:SIP/\d\.\d[ \t]+\d|[A-Za-z0-9.!%*_+`'~-]{1,64}[ \t][^\r\n]{1,4096}[ \t]SIP/\d\.\d)", re.IGNORECASE
)
_STATUS_LINE = re.compile(r"SIP/2\.0[ \t]+([0-9]{3})(?![^ \t])[ \t]*(.*)", re.IGNORECASE)
_CSEQ = re.compile(r"(\d{1,20})\s+(\S{1,64})", re.ASCII)
_BOUNDARY = re.compile(r';\s*boundary\s*=\s*(?:"([^"]{1,200})"|([^\s;"]{1,200}))', re.IGNORECASE)

# Spelled as most gear spells them, so that the usual line costs one look-up.
_USUAL_NAMES = {
    name: name.lower()
    for name in (
        *("Via", "From", "To", "Call-ID", "CSeq", "Contact", "Max-Forwards", "Content-Type", "Content-Length"),
        *("User-Agent", "Server", "Allow", "Supported", "Route", "Record-Route", "Require", "Expires", "Accept"),
        *("Session-Expires", "Min-SE", "Authorization", "Proxy-Authorization", "Date"),
    )
}


@dataclass(frozen=True, slots=True)
class BodyPart:
    """One part of a body."""

    content_type: str
    """media type in lower case, without parameters"""
    octets: bytes


@dataclass(frozen=True, slots=True)
class SipMessage:
    """A request or a response."""

    method: str
    """of a request; "" for a response"""
    request_uri: str
    status_code: int | None
    """None for a request"""
    reason_phrase: str
    headers: dict[str, list[str]]
    """values as written, by the full name of the field in lower case"""
    body: bytes
    call_id: str
    cseq_number: int
    cseq_method: str
    faults: tuple[str, ...] = ()
    """what is wrong with the message though it could be used, one clause each"""

    def header(self, name: str) -> str:
        """First value of a header field as written, "" where the message has none."""
        found = self.headers.get(name)
        return found[0] if found else ""

    def values(self, name: str) -> list[str]:
        """All values of a header field that may have several, whether on one line or on more (7.3.1)."""
        return [value for line in self.headers.get(name, ()) for value in split_values(line)]

    def parts(self) -> list[BodyPart]:
        """The parts of the body, those of a multipart body one by one (RFC 2046 section 5.1, from memory)."""
        return _parts(self.header("content-type"), self.body, MAX_DEPTH)[:MAX_PARTS]

    @property
    def start_line(self) -> str:
        """Start line as it is written in a table."""
        if self.status_code is None:
            return f"{self.method} {self.request_uri}"
        return f"{self.status_code} {self.reason_phrase}".rstrip()


def looks_like_sip(first_octets: bytes) -> bool:
    """Whether octets begin as a SIP message of any version does (section 7.1 and 7.2), after keep-alives (RFC 5626)."""
    return _SIP_FIRST.match(first_octets) is not None


def parse_message(octets: bytes, whole: bool = True) -> SipMessage:
    """A SIP message out of one datagram, or out of a stream that was cut at its message (section 18.3).

    ``whole`` is False where octets of the message are known to be missing at its end. Octets behind the announced end
    of the body are set aside.

    Raises
    ------
    MalformedPacket
        Where the message cannot be placed: no start line, no Call-ID, no CSeq.
    """
    octets = octets.lstrip(b"\r\n")
    end = _HEAD_END.search(octets, 0, MAX_HEAD_OCTETS)
    head, body = (octets[: end.start()], octets[end.end() :]) if end else (octets[:MAX_HEAD_OCTETS], b"")
    faults: list[str] = [] if whole else ["the end of the message is missing"]
    if end is None:
        head = _up_to_whole_line(head, faults)
    start_line, lines = _unfolded_lines(head)
    method, uri, status, phrase = _start_line(start_line)
    headers = _header_fields(lines, faults)
    number, cseq_method = _cseq(headers, faults, method)
    call_id = _only(headers, "call-id", faults)
    if not call_id:
        raise MalformedPacket(f"{_known(method) or status} without Call-ID")
    for name in ("from", "to"):
        if not _only(headers, name, faults):
            faults.append(f"no {name.capitalize()} header field")
    body = _body(headers, body, faults, whole)
    return SipMessage(method, uri, status, phrase, headers, body, call_id, number, cseq_method, tuple(faults))


def _up_to_whole_line(head: bytes, faults: list[str]) -> bytes:
    faults.append("no empty line behind the header fields")
    last = head.rfind(b"\n")
    # A last line without its end may have lost the end of its value.
    return head[:last] if last > 0 else head


def _unfolded_lines(head: bytes) -> tuple[str, list[str]]:
    text = head.decode("utf-8", "backslashreplace")
    if "\n " in text or "\n\t" in text:
        text = _FOLD.sub(" ", text)
    if "\r" in text:
        text = text.replace("\r\n", "\n").rstrip("\r")
    start_line, *lines = printable(text).split("\n")
    return start_line, lines[:MAX_HEADER_LINES]


def _start_line(line: str) -> tuple[str, str, int | None, str]:
    if len(line) > MAX_START_LINE:
        raise MalformedPacket(f"start line of {len(line)} characters")
    line = line.strip()
    if line[:8].upper().startswith("SIP/"):
        found = _STATUS_LINE.fullmatch(line)
        if found is None or not 100 <= int(found[1]) <= 699:
            raise MalformedPacket(f"status line {line[:60]!r} is not of SIP/2.0 with a status of 100 to 699")
        return "", "", int(found[1]), found[2]
    method, _, rest = line.partition(" ")
    if not rest[-8:].upper().endswith(" SIP/2.0") or not TOKEN.fullmatch(method):
        raise MalformedPacket(f"start line {line[:60]!r} is not of SIP/2.0")
    upper = method.upper()
    return upper if upper in METHODS else method, rest[:-8].strip().strip("<>"), None, ""


def _header_fields(lines: list[str], faults: list[str]) -> dict[str, list[str]]:
    headers: dict[str, list[str]] = {}
    for line in lines:
        name, colon, value = line.partition(":")
        if colon:
            key = _USUAL_NAMES.get(name) or header_name(name)
            headers.setdefault(key, []).append(value.strip())
        elif line.strip():
            faults.append("a header line without colon")
    return headers


def _only(headers: dict[str, list[str]], name: str, faults: list[str]) -> str:
    found = headers.get(name)
    if not found:
        return ""
    if len(found) > 1:
        faults.append(f"{len(found)} header fields {name}, of which the first is taken")
    return found[0]


def _cseq(headers: dict[str, list[str]], faults: list[str], method: str) -> tuple[int, str]:
    found = _CSEQ.match(_only(headers, "cseq", faults))
    if found is None or int(found[1]) >= MAX_CSEQ:
        raise MalformedPacket(f"{_known(method) or 'response'} without a CSeq of a number below 2^32 and a method")
    upper = found[2].upper()
    named = upper if upper in METHODS else found[2]
    if method and named != method:
        faults.append(f"CSeq of {_known(named)} in {_known(method)}")
        named = method
    return int(found[1]), named


def _known(method: str) -> str:
    """A method as it may stand in a sentence of ours: whatever comes from outside stands in quotes there."""
    return method if not method or method in METHODS else "an unknown method"


def _body(headers: dict[str, list[str]], rest: bytes, faults: list[str], whole: bool) -> bytes:
    lengths = headers.get("content-length")
    if not lengths:
        return rest
    announced = lengths[0]
    if not (announced.isascii() and announced.isdecimal() and len(announced) < 10) or len(set(lengths)) > 1:
        faults.append(f"Content-Length {' and '.join(lengths[:3])[:40]!r}, so the body is all that follows")
        return rest
    length = int(announced)
    if length > len(rest) and whole:
        faults.append(f"Content-Length {length} but {len(rest)} octets of body")
    surplus = rest[length:]
    if not surplus.strip(_BLANK):
        return rest[:length]
    if length and rest[length - 1] != _LINE_END and "sdp" in "".join(headers.get("content-type", ())).lower():
        # Gear that counts its line ends wrongly: the announced end falls into the middle of a line.
        faults.append(f"Content-Length {length} ends within a line, so the body is all that follows")
        return rest
    faults.append(f"{len(surplus)} octets behind the body set aside")
    return rest[:length]


def _parts(content_type: str, octets: bytes, depth: int) -> list[BodyPart]:
    if not octets.strip(_BLANK):
        return []
    media_type = content_type.partition(";")[0].strip().lower()
    boundary = _BOUNDARY.search(content_type) if media_type.startswith("multipart/") else None
    if boundary is None or depth == 0:
        if not media_type and octets.lstrip().startswith(b"v=0"):
            media_type = "application/sdp"
        return [BodyPart(media_type, octets)]
    name = re.escape((boundary[1] or boundary[2]).encode())
    delimiter = re.compile(rb"(?:^|\r?\n)--" + name + rb"(--)?[ \t]*(?:\r?\n|$)")
    marks = list(islice(delimiter.finditer(octets), MAX_PARTS + 1))
    found: list[BodyPart] = []
    ends = [mark.start() for mark in marks[1:]] + [len(octets)]
    for mark, end in zip(marks, ends, strict=False):
        if mark[1] is None and len(found) < MAX_PARTS:
            found += _part(octets[mark.end() : end], depth)
    return found


def _part(octets: bytes, depth: int) -> list[BodyPart]:
    end = _HEAD_END.search(octets, 0, MAX_HEAD_OCTETS)
    if octets[:2] == b"\r\n" or octets[:1] == b"\n" or end is None:
        return _parts("", octets.lstrip(b"\r\n"), depth - 1)
    headers = _header_fields(_unfolded_lines(b"\n" + octets[: end.start()])[1], [])
    return _parts("".join(headers.get("content-type", [])[:1]), octets[end.end() :], depth - 1)
