"""Secured RTCP told from plain (RFC 3711 section 3.4): its first eight octets and the index near its end are plain."""

TYPES = range(192, 224)
"""Packet types given out, or kept apart from RTP's payload types (RFC 5761 section 4)."""

# Octets from the word with the E flag and the index to the end, where no master key identifier comes between them:
# with authentication tags of 80 and of 32 bits (RFC 3711 section 4.2; RFC 4568 section 6.2), and behind a tag of
# 128 bits that belongs to the encrypted octets (RFC 7714 section 9.2, from memory).
TAILS = (14, 8, 4)
AUTHENTICATED_TAILS = (14, 8)
ENCRYPTED = 1 << 31
MOST_PACKETS = 1 << 20
"""An index counts from 0 with every packet, a few in a second at most: a larger one is no index."""


def sound_end(octets: bytes) -> int:
    """Where the row of packets ends whose headers lead from one to the next (RFC 3550 A.2); 0 if there is none."""
    at = 0
    while at + 4 <= len(octets) and octets[at] >> 6 == 2 and octets[at + 1] in TYPES:
        after = at + 4 + 4 * int.from_bytes(octets[at + 2 : at + 4], "big")
        if after > len(octets):
            break
        at = after
    return at


def encryption(octets: bytes) -> str:
    """``encrypted``, ``authenticated`` (readable, with an index and a tag at its end), or empty where it is plain."""
    end = sound_end(octets)
    if end == 0 or end == len(octets):
        return ""
    words = {tail: int.from_bytes(octets[-tail:][:4], "big") for tail in TAILS if len(octets) - tail >= 8}
    if any(end == len(octets) - tail and words.get(tail, ENCRYPTED) < MOST_PACKETS for tail in AUTHENTICATED_TAILS):
        return "authenticated"
    return "encrypted" if any(0 <= word - ENCRYPTED < MOST_PACKETS for word in words.values()) else ""
