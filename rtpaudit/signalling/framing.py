"""Octets of one direction of a stream transport come in, whole SIP messages go out (RFC 3261 sections 18.3 and 20.14).

Several messages may come in one segment and one over many; a capture may begin in the middle of a message, and octets
may be missing. Content-Length is believed as long as no start line contradicts it.
"""

import re
from collections import deque
from dataclasses import dataclass, field

from rtpaudit.signalling.grammar import METHODS

MAX_HEAD_OCTETS = 65_536
MAX_BODY_OCTETS = 262_144
MAX_LINE_OCTETS = 8192

_START = (
    rb"(?:SIP/2\.0[ \t]+[1-6]\d\d[ \t\r\n]|[A-Za-z0-9.!%*_+`'~-]{1,64}[ \t][^\r\n]{1,4096}[ \t]SIP/2\.0[ \t]*\r?\n)"
)
_START_LINE = re.compile(_START, re.IGNORECASE)
_NEXT_START = re.compile(rb"\n" + _START, re.IGNORECASE)
_HEAD_END = re.compile(rb"\r?\n\r?\n")
_CONTENT_LENGTH = re.compile(rb"\n(?:Content-Length|l)[ \t]*:[ \t]*(\d{1,9})[ \t]*\r?(?:\n|$)", re.IGNORECASE)
_CONTENT_TYPE = re.compile(rb"\n(?:Content-Type|c)[ \t]*:[ \t]*([^\r\n;]{1,100})", re.IGNORECASE)
_KEEP_ALIVE = b"\r\n\0"
_KNOWN_WORDS = (b"SIP/2.0 ", *(f"{method} "[:9].encode() for method in METHODS))
_KEEP_ALIVES = (b"\r", b"\n", b"\0")


@dataclass(frozen=True, slots=True)
class FramedMessage:
    """One message cut out of a stream."""

    octets: bytes
    time_ns: int
    """arrival of its last octet"""
    frame: int
    """the one that brought its last octet"""
    whole: bool = True
    """False where octets of it are missing"""
    first_frame: int = 0
    """the one that brought its first octet, 0 where that is not told apart"""


@dataclass(slots=True)
class MessageStream:
    """The messages of one direction, as their octets arrive."""

    skipped: int = 0
    """octets that belong to no message"""
    found: int = 0
    """messages so far"""
    _synchronised: bool = False
    """True where the buffer begins behind a message"""
    _buffer: bytearray = field(default_factory=bytearray)
    _arrivals: deque[tuple[int, int, int]] = field(default_factory=deque)
    """end within the stream, time and frame of every chunk that still matters"""
    _begin: int = 0
    """place of the buffer within the stream"""
    _needed: int = 0
    """length that the buffer must reach before it is worth another look"""
    _searched: int = 0
    """octets of the buffer that hold no end of a head"""

    def feed(self, octets: bytes, time_ns: int, frame: int, gap_before: bool = False) -> list[FramedMessage]:
        """Messages that are complete with this chunk."""
        messages = self.flush() if gap_before else []
        self._buffer += octets
        self._arrivals.append((self._begin + len(self._buffer), time_ns, frame))
        if len(self._buffer) < self._needed:
            return messages
        return messages + self._messages(last=False)

    def flush(self) -> list[FramedMessage]:
        """What the end of the stream, or a gap in it, leaves of a message."""
        messages = self._messages(last=True)
        self._drop(len(self._buffer))
        self._synchronised = False
        return messages

    def _messages(self, last: bool) -> list[FramedMessage]:
        found: list[FramedMessage] = []
        self._needed = 0
        while self._to_start_line():
            end = _HEAD_END.search(self._buffer, max(self._searched - 3, 0), MAX_HEAD_OCTETS)
            if end is None:
                self._searched = len(self._buffer)
                if not last and self._searched < MAX_HEAD_OCTETS:
                    break
                found.append(self._take(self._next_start(0) or len(self._buffer), whole=False))
                continue
            cut = self._next_start(0, end.start())
            length = cut or self._length(end.start(), end.end(), last)
            if length > len(self._buffer) and not last:
                self._needed = length
                break
            whole = cut is None and length <= len(self._buffer)
            found.append(self._take(min(length, len(self._buffer)), whole))
        return found

    def _to_start_line(self) -> bool:
        """Drops what stands before the next start line; False where none has come whole."""
        if self._buffer[:1] in _KEEP_ALIVES:
            self._drop(len(self._buffer) - len(self._buffer.lstrip(_KEEP_ALIVE)))
        if not self._buffer:
            return False
        if _START_LINE.match(self._buffer) and (self._synchronised or self._known_start()):
            return True
        line_end = self._buffer.find(b"\n", 0, MAX_LINE_OCTETS)
        if line_end < 0 and len(self._buffer) < MAX_LINE_OCTETS:
            return False
        place = self._next_start(0)
        if place is None:
            # The last line may be the begin of a start line.
            last_line = self._buffer.rfind(b"\n") + 1
            place = last_line if len(self._buffer) - last_line < MAX_LINE_OCTETS else len(self._buffer)
            self.skipped += place
            self._drop(place)
            return False
        self.skipped += place
        self._drop(place)
        return True

    def _known_start(self) -> bool:
        """Whether a known method begins the line: the rest of a longer word would look like a method of its own."""
        word = bytes(self._buffer[:9]).upper()
        return word.startswith(_KNOWN_WORDS)

    def _next_start(self, begin: int, end: int | None = None) -> int | None:
        """Place of the next start line whose line begins behind ``begin``."""
        found = _NEXT_START.search(self._buffer, begin, len(self._buffer) if end is None else end)
        return found.start() + 1 if found else None

    def _length(self, head_end: int, body: int, last: bool) -> int:
        """Octets of the message at the begin of the buffer, as far as they can be told."""
        head = bytes(self._buffer[: head_end + 1])
        said, kind = _CONTENT_LENGTH.search(head), _CONTENT_TYPE.search(head)
        media_type = kind[1].lower() if kind else b""
        if said is None or int(said[1]) > MAX_BODY_OCTETS:
            return (self._next_start(body - 1) or len(self._buffer)) if kind else body
        length = body + int(said[1])
        if length > len(self._buffer) and not last:
            return length
        if not media_type.startswith(b"message/"):
            # A start line inside the body: the length is wrong, or octets are missing.
            inside = self._next_start(body - 1, min(length, len(self._buffer)))
            if inside is not None:
                return inside
        rest = bytes(self._buffer[length : length + MAX_LINE_OCTETS])
        cut_short = body < length and self._buffer[length - 1 : length] != b"\n" and b"sdp" in media_type
        if cut_short and rest.strip(_KEEP_ALIVE) and not _START_LINE.match(rest):
            return self._next_start(length - 1) or len(self._buffer)
        return length

    def _take(self, length: int, whole: bool) -> FramedMessage:
        octets = bytes(self._buffer[:length])
        end = self._begin + length
        _, _, first_frame = next((one for one in self._arrivals if one[0] > self._begin), self._arrivals[-1])
        _, time_ns, frame = next((one for one in self._arrivals if one[0] >= end), self._arrivals[-1])
        self._drop(length)
        self._synchronised = True
        self.found += 1
        return FramedMessage(octets, time_ns, frame, whole, first_frame)

    def _drop(self, length: int) -> None:
        if length:
            del self._buffer[:length]
            self._begin += length
            self._searched = 0
            while self._arrivals and self._arrivals[0][0] <= self._begin:
                self._arrivals.popleft()
