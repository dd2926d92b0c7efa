"""Octets of one direction of a WebSocket connection come in, its messages go out (RFC 6455 section 5, from memory).

SIP over WebSocket puts exactly one SIP message into one WebSocket message (RFC 7118 section 5).
"""

import zlib
from dataclasses import dataclass, field

MAX_MESSAGE_OCTETS = 262_144
MAX_HANDSHAKE_OCTETS = 32_768

_CONTINUATION, _TEXT, _BINARY = 0, 1, 2
_FIN, _COMPRESSED, _RESERVED, _MASKED = 0x80, 0x40, 0x30, 0x80
_DEFLATE_TAIL = b"\x00\x00\xff\xff"


@dataclass(slots=True)
class WebSocketStream:
    """The messages of one direction behind the handshake."""

    broken: bool = False
    """True once the octets make no frames any more; nothing further is read"""
    _buffer: bytearray = field(default_factory=bytearray)
    _parts: list[bytes] = field(default_factory=list)
    _compressed: bool = False
    _inflater: "zlib._Decompress" = field(default_factory=lambda: zlib.decompressobj(-zlib.MAX_WBITS))

    def feed(self, octets: bytes) -> list[bytes]:
        """Messages that are complete with these octets."""
        found: list[bytes] = []
        if self.broken:
            return found
        self._buffer += octets
        while (frame := self._frame()) is not None:
            message = self._add(*frame)
            if message is not None:
                found.append(message)
        return found

    def restart(self) -> None:
        """Begins anew behind a gap: the next octets are taken for the begin of a frame."""
        self._buffer.clear()
        self._parts.clear()
        self.broken = False
        self._inflater = zlib.decompressobj(-zlib.MAX_WBITS)

    def _frame(self) -> tuple[int, bytes] | None:
        """First octet and payload of the next frame, None where it has not come whole."""
        if self.broken or len(self._buffer) < 2:
            return None
        first, second = self._buffer[0], self._buffer[1]
        width = {126: 2, 127: 8}.get(second & 0x7F, 0)
        begin = 2 + width + (4 if second & _MASKED else 0)
        if len(self._buffer) < begin:
            return None
        length = int.from_bytes(self._buffer[2 : 2 + width]) if width else second & 0x7F
        if length > MAX_MESSAGE_OCTETS or first & _RESERVED or first & 0x0F not in (0, 1, 2, 8, 9, 10):
            self.broken = True
            return None
        if len(self._buffer) < begin + length:
            return None
        payload = bytes(self._buffer[begin : begin + length])
        if second & _MASKED:
            payload = _unmasked(payload, bytes(self._buffer[begin - 4 : begin]))
        del self._buffer[: begin + length]
        return first, payload

    def _add(self, first: int, payload: bytes) -> bytes | None:
        """The message that a frame completes, None for control frames and parts."""
        kind = first & 0x0F
        if kind in (_TEXT, _BINARY):
            self._parts = [payload]
            self._compressed = bool(first & _COMPRESSED)
        elif kind == _CONTINUATION and self._parts:
            self._parts.append(payload)
        else:
            return None
        if sum(map(len, self._parts)) > MAX_MESSAGE_OCTETS:
            self._parts = []
            return None
        if not first & _FIN:
            return None
        message, self._parts = b"".join(self._parts), []
        return self._inflated(message) if self._compressed else message

    def _inflated(self, message: bytes) -> bytes | None:
        """A message of permessage-deflate (RFC 7692, from memory), whether or not its sender kept the window."""
        for fresh in (False, True):
            inflater = zlib.decompressobj(-zlib.MAX_WBITS) if fresh else self._inflater
            try:
                octets = inflater.decompress(message + _DEFLATE_TAIL, MAX_MESSAGE_OCTETS)
            except zlib.error:
                continue
            self._inflater = inflater
            return octets
        self._inflater = zlib.decompressobj(-zlib.MAX_WBITS)
        return None


def handshake_end(octets: bytes) -> int | None:
    """Octets of the handshake that begins a direction (RFC 6455 section 4).

    0 where there is none, None until it has come whole.
    """
    if not octets.startswith((b"GET ", b"HTTP/1.1 101")):
        return 0
    end = octets.find(b"\r\n\r\n", 0, MAX_HANDSHAKE_OCTETS)
    if end < 0:
        return None if len(octets) < MAX_HANDSHAKE_OCTETS else 0
    return end + 4 if b"websocket" in octets[:end].lower() else 0


def first_payload(octets: bytes) -> bytes:
    """Payload of the frame at the begin of a chunk, as far as it is there; nothing where no data frame begins."""
    if len(octets) < 2 or octets[0] & 0x0F not in (_TEXT, _BINARY) or octets[0] & (_RESERVED | _COMPRESSED):
        return b""
    width = {126: 2, 127: 8}.get(octets[1] & 0x7F, 0)
    begin = 2 + width + (4 if octets[1] & _MASKED else 0)
    payload = octets[begin : begin + 4200]
    return _unmasked(payload, octets[begin - 4 : begin]) if octets[1] & _MASKED else payload


def _unmasked(payload: bytes, key: bytes) -> bytes:
    if len(key) < 4:
        return b""
    mask = (key * (len(payload) // 4 + 1))[: len(payload)]
    return (int.from_bytes(payload) ^ int.from_bytes(mask)).to_bytes(len(payload))
