"""Slow readers of sound captures, from the text of the format specifications."""

import struct
from fractions import Fraction


def time_ns(ticks: int, resolution: int, offset_s: int) -> int:
    """A pcapng time stamp: if_tsresol is a power of ten, or of two where its highest bit is set."""
    base = 2 if resolution & 0x80 else 10
    return int(Fraction(ticks * 10**9, base ** (resolution & 0x7F))) + offset_s * 10**9


def pcap_frames(capture: bytes) -> list[tuple[int, bytes, int]]:
    """Time in ns, octets and original length of each record."""
    magic = capture[:4].hex()
    order = ">" if magic.startswith("a1b2") else "<"
    tick_ns = 1000 if magic in ("a1b2c3d4", "d4c3b2a1") else 1
    frames = []
    at = 24
    while at < len(capture):
        seconds, ticks, captured, original = struct.unpack_from(order + "IIII", capture, at)
        at += 16
        frames.append((seconds * 10**9 + ticks * tick_ns, capture[at : at + captured], original))
        at += captured
    return frames
