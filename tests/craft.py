"""Captures, frames and packets made by hand, to the octet."""

import struct
from collections.abc import Sequence
from ipaddress import ip_address

A, B = "192.0.2.10", "192.0.2.20"
A6, B6 = "2001:db8::10", "2001:db8::20"
START_NS = 1_700_000_000_000_000_000
PACKET_TIME_NS = 20_000_000


def spaced(count: int, start_ns: int = START_NS, step_ns: int = PACKET_TIME_NS) -> list[int]:
    """Evenly spaced arrival times."""
    return [start_ns + row * step_ns for row in range(count)]


# Captures


def pcap(
    frames: Sequence[bytes],
    times_ns: Sequence[int] | None = None,
    *,
    originals: Sequence[int] | None = None,
    link_type: int = 1,
    snap_length: int = 65535,
    nanoseconds: bool = False,
    big_endian: bool = False,
) -> bytes:
    """A pcap file. Times are 20 ms apart by default; ``originals`` are the lengths on the wire."""
    order = ">" if big_endian else "<"
    magic, tick = (0xA1B23C4D, 1) if nanoseconds else (0xA1B2C3D4, 1000)
    parts = [struct.pack(order + "IHHiIII", magic, 2, 4, 0, 0, snap_length, link_type)]
    for frame, time_ns, original in _rows(frames, times_ns, originals):
        seconds, rest = divmod(time_ns, 1_000_000_000)
        parts += [struct.pack(order + "IIII", seconds, rest // tick, len(frame), original), frame]
    return b"".join(parts)


def _rows(
    frames: Sequence[bytes], times_ns: Sequence[int] | None, originals: Sequence[int] | None
) -> list[tuple[bytes, int, int]]:
    times = spaced(len(frames)) if times_ns is None else times_ns
    lengths = [len(frame) for frame in frames] if originals is None else originals
    return list(zip(frames, times, lengths, strict=True))


def pcapng(
    frames: Sequence[bytes],
    times_ns: Sequence[int] | None = None,
    *,
    originals: Sequence[int] | None = None,
    link_type: int = 1,
    big_endian: bool = False,
) -> bytes:
    """A pcapng file of one section, one interface with nanosecond times, and enhanced packet blocks."""
    parts = [pcapng_section(big_endian), pcapng_interface(link_type, options=[(9, b"\x09")], big_endian=big_endian)]
    for frame, time_ns, original in _rows(frames, times_ns, originals):
        parts.append(pcapng_enhanced(frame, time_ns, original=original, big_endian=big_endian))
    return b"".join(parts)


def pcapng_block(kind: int, body: bytes, big_endian: bool = False) -> bytes:
    """Any pcapng block: type, total length, body padded to 32 bits, total length again."""
    body = _padded(body)
    ends = struct.pack((">" if big_endian else "<") + "II", kind, len(body) + 12)
    return ends + body + ends[4:]


def _padded(octets: bytes) -> bytes:
    return octets + bytes(-len(octets) % 4)


def pcapng_options(options: Sequence[tuple[int, bytes]], big_endian: bool = False) -> bytes:
    """A list of options, closed where there is any."""
    order = ">" if big_endian else "<"
    parts = [struct.pack(order + "HH", code, len(value)) + _padded(value) for code, value in options]
    return b"".join(parts) + (bytes(4) if options else b"")


def pcapng_section(big_endian: bool = False, length: int = -1) -> bytes:
    """Section header block."""
    return pcapng_block(
        0x0A0D0D0A, struct.pack((">" if big_endian else "<") + "IHHq", 0x1A2B3C4D, 1, 0, length), big_endian
    )


def pcapng_interface(
    link_type: int = 1, snap_length: int = 0, options: Sequence[tuple[int, bytes]] = (), big_endian: bool = False
) -> bytes:
    """Interface description block: option 2 is the name, 9 the resolution, 14 the time offset."""
    head = struct.pack((">" if big_endian else "<") + "HHI", link_type, 0, snap_length)
    return pcapng_block(1, head + pcapng_options(options, big_endian), big_endian)


def pcapng_enhanced(
    frame: bytes,
    ticks: int,
    interface: int = 0,
    *,
    original: int | None = None,
    options: Sequence[tuple[int, bytes]] = (),
    big_endian: bool = False,
) -> bytes:
    """Enhanced packet block; ``ticks`` in the interface's resolution."""
    length = len(frame) if original is None else original
    head = struct.pack(
        (">" if big_endian else "<") + "IIIII", interface, ticks >> 32, ticks & 0xFFFFFFFF, len(frame), length
    )
    return pcapng_block(6, head + _padded(frame) + pcapng_options(options, big_endian), big_endian)


def pcapng_simple(frame: bytes, original: int | None = None, big_endian: bool = False) -> bytes:
    """Simple packet block: no time, interface 0."""
    length = len(frame) if original is None else original
    return pcapng_block(3, struct.pack((">" if big_endian else "<") + "I", length) + frame, big_endian)


def pcapng_obsolete(frame: bytes, ticks: int, interface: int = 0, drops: int = 0, big_endian: bool = False) -> bytes:
    """Packet block of the first drafts."""
    head = struct.pack(
        (">" if big_endian else "<") + "HHIIII",
        interface, drops, ticks >> 32, ticks & 0xFFFFFFFF, len(frame), len(frame),
    )  # fmt: skip
    return pcapng_block(2, head + frame, big_endian)


def pcapng_statistics(
    interface: int = 0, received: int | None = None, dropped: int | None = None, big_endian: bool = False
) -> bytes:
    """Interface statistics block."""
    order = ">" if big_endian else "<"
    counts = [(code, count) for code, count in ((4, received), (5, dropped)) if count is not None]
    options = [(code, struct.pack(order + "Q", count)) for code, count in counts]
    return pcapng_block(
        5, struct.pack(order + "III", interface, 0, 0) + pcapng_options(options, big_endian), big_endian
    )


# Frames and packets


def ethernet(payload: bytes, ether_type: int = 0x0800, vlans: Sequence[int] = (), tag: int = 0x8100) -> bytes:
    """Ethernet frame; outer VLAN first. IPv6 is EtherType 0x86dd."""
    tags = b"".join(struct.pack("!HH", tag, vlan) for vlan in vlans)
    return bytes.fromhex("020000000001 020000000002") + tags + struct.pack("!H", ether_type) + payload


def ipv4(
    payload: bytes,
    source: str = A,
    destination: str = B,
    *,
    protocol: int = 17,
    ttl: int = 64,
    dscp: int = 0,
    identification: int = 0,
    fragment_offset: int = 0,
    more_fragments: bool = False,
    options: bytes = b"",
) -> bytes:
    """IPv4 packet with a good header checksum; ``fragment_offset`` in octets."""
    options = _padded(options)
    header = struct.pack(
        "!BBHHHBBH",
        0x45 + len(options) // 4, dscp << 2, 20 + len(options) + len(payload), identification,
        more_fragments << 13 | fragment_offset // 8, ttl, protocol, 0,
    )  # fmt: skip
    header += ip_address(source).packed + ip_address(destination).packed + options
    return header[:10] + struct.pack("!H", internet_checksum(header)) + header[12:] + payload


def internet_checksum(octets: bytes) -> int:
    """RFC 1071, from memory."""
    total: int = sum(struct.unpack(f"!{(len(octets) + 1) // 2}H", octets + bytes(len(octets) % 2)))
    while total >> 16:
        total = (total & 0xFFFF) + (total >> 16)
    return total ^ 0xFFFF


def ipv6(
    payload: bytes,
    source: str = A6,
    destination: str = B6,
    *,
    next_header: int = 17,
    hop_limit: int = 64,
    dscp: int = 0,
) -> bytes:
    """IPv6 packet; extension headers are part of ``payload``, ``next_header`` names the first."""
    head = struct.pack("!IHBB", 6 << 28 | dscp << 22, len(payload), next_header, hop_limit)
    return head + ip_address(source).packed + ip_address(destination).packed + payload


def udp(payload: bytes, source_port: int = 4000, destination_port: int = 4002, checksum: int = 0) -> bytes:
    """UDP datagram; checksum 0 means none was made."""
    return struct.pack("!HHHH", source_port, destination_port, 8 + len(payload), checksum) + payload


def tcp(payload: bytes, source_port: int, destination_port: int, sequence: int, flags: int = 0x18) -> bytes:
    """TCP segment; flags are ACK and PSH by default."""
    return struct.pack("!HHIIBBHHH", source_port, destination_port, sequence, 0, 5 << 4, flags, 65535, 0, 0) + payload


def rtp(
    payload: bytes = bytes([0xFF]) * 160,
    sequence: int = 0,
    timestamp: int = 0,
    ssrc: int = 0x1A2B3C4D,
    payload_type: int = 0,
    *,
    marker: bool = False,
    csrcs: Sequence[int] = (),
    extension: tuple[int, bytes] | None = None,
    padding: int = 0,
) -> bytes:
    """RTP packet (RFC 3550, 5.1); the extension is profile and octets, padding counts its own last octet."""
    first = 0x80 | (padding > 0) << 5 | (extension is not None) << 4 | len(csrcs)
    parts = [struct.pack("!BBHII", first, marker << 7 | payload_type, sequence & 0xFFFF, timestamp & 0xFFFFFFFF, ssrc)]
    parts += [struct.pack("!I", csrc) for csrc in csrcs]
    if extension is not None:
        words = _padded(extension[1])
        parts.append(struct.pack("!HH", extension[0], len(words) // 4) + words)
    parts.append(payload)
    if padding:
        parts.append(bytes(padding - 1) + bytes([padding]))
    return b"".join(parts)


def rtp_frame(
    sequence: int, timestamp: int | None = None, source_port: int = 4000, destination_port: int = 4002
) -> bytes:
    """An Ethernet frame with 20 ms of PCMU silence from A to B; the timestamp follows the sequence number."""
    ticks = 160 * sequence if timestamp is None else timestamp
    return ethernet(ipv4(udp(rtp(sequence=sequence, timestamp=ticks), source_port, destination_port)))
