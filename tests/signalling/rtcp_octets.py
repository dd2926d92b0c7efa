"""RTCP packets made by hand."""

import struct
from collections.abc import Sequence

SR, RR, SDES, BYE, APP, XR = 200, 201, 202, 203, 204, 207


def packet(kind: int, count: int, body: bytes, padding: int = 0) -> bytes:
    """Any RTCP packet (RFC 3550, 6.4.1); padding counts its own last octet."""
    if padding:
        body += bytes(padding - 1) + bytes([padding])
    body += bytes(-len(body) % 4)
    return struct.pack("!BBH", 0x80 | (padding > 0) << 5 | count, kind, len(body) // 4) + body


def report_block(
    ssrc: int, fraction: int = 0, lost: int = 0, highest: int = 0, jitter: int = 0, last_sr: int = 0, delay: int = 0
) -> bytes:
    """RFC 3550, 6.4.1."""
    return struct.pack("!6I", ssrc, fraction << 24 | lost & 0xFFFFFF, highest, jitter, last_sr, delay)


def sender_report(
    ssrc: int, ntp: int, timestamp: int, packets: int, octets: int, blocks: Sequence[bytes] = ()
) -> bytes:
    """RFC 3550, 6.4.1."""
    return packet(SR, len(blocks), struct.pack("!IQIII", ssrc, ntp, timestamp, packets, octets) + b"".join(blocks))


def receiver_report(ssrc: int, blocks: Sequence[bytes] = ()) -> bytes:
    """RFC 3550, 6.4.2."""
    return packet(RR, len(blocks), struct.pack("!I", ssrc) + b"".join(blocks))


def source_description(chunks: Sequence[tuple[int, Sequence[tuple[int, bytes]]]]) -> bytes:
    """RFC 3550, 6.5."""
    body = b""
    for ssrc, items in chunks:
        body += struct.pack("!I", ssrc) + b"".join(bytes([kind, len(text)]) + text for kind, text in items)
        body += bytes(4 - len(body) % 4)
    return packet(SDES, len(chunks), body)


def goodbye(ssrcs: Sequence[int], reason: bytes = b"") -> bytes:
    """RFC 3550, 6.6."""
    body = struct.pack(f"!{len(ssrcs)}I", *ssrcs) + (bytes([len(reason)]) + reason if reason else b"")
    return packet(BYE, len(ssrcs), body)


def extended_report(ssrc: int, blocks: Sequence[bytes]) -> bytes:
    """RFC 3611, 2."""
    return packet(XR, 0, struct.pack("!I", ssrc) + b"".join(blocks))


def xr_block(kind: int, content: bytes, specific: int = 0) -> bytes:
    """RFC 3611, 3."""
    content += bytes(-len(content) % 4)
    return struct.pack("!BBH", kind, specific, len(content) // 4) + content


def run_lengths(kind: int, ssrc: int, begin: int, end: int, chunks: Sequence[int], thinning: int = 0) -> bytes:
    """RFC 3611, 4.1 and 4.2."""
    content = struct.pack(f"!IHH{len(chunks)}H", ssrc, begin, end, *chunks)
    return xr_block(kind, content, thinning)


def secured(plain: bytes, index: int, tag: int = 10, encrypted: bool = True) -> bytes:
    """The shape of SRTCP (RFC 3711, 3.4): all but eight octets made unreadable, flag and index, authentication tag."""
    hidden = bytes(octet ^ 0xA5 for octet in plain[8:]) if encrypted else plain[8:]
    return plain[:8] + hidden + struct.pack("!I", encrypted << 31 | index) + bytes(range(100, 100 + tag))
