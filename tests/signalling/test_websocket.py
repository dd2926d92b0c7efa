import zlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.signalling.websocket import WebSocketStream, first_payload, handshake_end
from tests.signalling.torture import request, wire

INVITE = request("web", length="")
REQUEST = wire(
    """
GET / HTTP/1.1
Host: sip-ws.example.com
Upgrade: websocket
Connection: Upgrade
Sec-WebSocket-Key: dGhlIHNhbXBsZSBub25jZQ==
Origin: http://www.example.com
Sec-WebSocket-Protocol: sip
Sec-WebSocket-Version: 13
"""
)
"""RFC 7118 section 4.1"""
RESPONSE = wire(
    "HTTP/1.1 101 Switching Protocols\nUpgrade: websocket\nConnection: Upgrade\nSec-WebSocket-Protocol: sip"
)


def frame(payload: bytes, opcode: int = 1, *, last: bool = True, key: bytes = b"", compressed: bool = False) -> bytes:
    """RFC 6455 section 5.2."""
    size = len(payload)
    length = (
        bytes([size]) if size < 126 else b"\x7e" + size.to_bytes(2) if size < 65_536 else b"\x7f" + size.to_bytes(8)
    )
    length = bytes([length[0] | (0x80 if key else 0)]) + length[1:]
    masked = bytes(octet ^ key[row % 4] for row, octet in enumerate(payload)) if key else payload
    return bytes([(0x80 if last else 0) | (0x40 if compressed else 0) | opcode]) + length + key + masked


@pytest.mark.parametrize("key", [b"", b"\x01\x02\x03\x04", b"\x00\x00\x00\x00"])
@pytest.mark.parametrize("size", [0, 1, 125, 126, 127, 65_535, 65_536])
def test_frames_of_every_length_masked_or_not(size: int, key: bytes) -> None:
    payload = (b"SIP over WebSocket " * 4000)[:size]
    assert WebSocketStream().feed(frame(payload, key=key)) == [payload]


def test_a_message_in_parts_with_a_ping_between_them() -> None:
    octets = frame(b"INV", last=False) + frame(b"?", 9) + frame(b"I", 0, last=False) + frame(b"TE", 0)
    assert WebSocketStream().feed(octets) == [b"INVITE"]


def test_compressed_messages_that_share_a_window() -> None:
    deflater, stream = zlib.compressobj(wbits=-15), WebSocketStream()
    for _ in range(3):
        octets = deflater.compress(INVITE) + deflater.flush(zlib.Z_SYNC_FLUSH)
        assert stream.feed(frame(octets[:-4], compressed=True)) == [INVITE]


def test_compressed_messages_that_begin_anew() -> None:
    stream = WebSocketStream()
    for _ in range(3):
        deflater = zlib.compressobj(wbits=-15)
        octets = deflater.compress(INVITE) + deflater.flush(zlib.Z_SYNC_FLUSH)
        assert stream.feed(frame(octets[:-4], compressed=True)) == [INVITE]


def test_a_compression_bomb_is_bounded() -> None:
    deflater = zlib.compressobj(9, wbits=-15)
    octets = deflater.compress(bytes(50_000_000)) + deflater.flush(zlib.Z_SYNC_FLUSH)
    (message,) = WebSocketStream().feed(frame(octets[:-4], compressed=True))
    assert len(message) <= 262_144


def test_octets_that_make_no_frames_end_the_reading() -> None:
    stream = WebSocketStream()
    assert stream.feed(b"\xff" * 20) == []
    assert stream.broken
    assert stream.feed(frame(b"x")) == []


@given(st.binary(max_size=300), st.lists(st.integers(1, 40), max_size=20))
def test_noise_never_fails_however_it_is_cut(octets: bytes, cuts: list[int]) -> None:
    stream, begin = WebSocketStream(), 0
    for cut in [*cuts, 1000]:
        stream.feed(octets[begin : begin + cut])
        begin += cut
    first_payload(octets)
    handshake_end(octets)
