"""What a file is, by its first octets and never by its name; and one clause for each thing that it may be instead."""

HEAD = 64
"""First octets that suffice to tell."""

CONTAINERS = {
    b"\xd4\xc3\xb2\xa1": "pcap",
    b"\xa1\xb2\xc3\xd4": "pcap",
    b"\x4d\x3c\xb2\xa1": "pcap",
    b"\xa1\xb2\x3c\x4d": "pcap",
    b"\n\r\r\n": "pcapng",
}
SHORTEST = {"pcap": 24, "pcapng": 28}
"""Octets of the file header, or of the shortest section header."""

# Relatives of pcap whose records have other headers; in both byte orders (from memory).
MODIFIED_PCAP = {
    magic if order == "big" else magic[::-1]
    for magic in (b"\xa1\xb2\xcd\x34", b"\xa1\xb2\x34\xcd", b"\xa1\xe2\xcb\x12")
    for order in ("big", "little")
}
OTHERS = {
    b"BZh": "is compressed by bzip2, which is not read here: decompress it first",
    b"\x04\x22\x4d\x18": "is compressed by lz4, which is not read here: decompress it first",
    b"PK\x03\x04": "is a zip archive: unpack it first",
    b"7z\xbc\xaf\x27\x1c": "is a 7z archive: unpack it first",
    b"snoop\x00\x00\x00": "is a capture of the format of RFC 1761, which is not read here: convert it to pcapng first",
    b"RIFF": "holds sound, not packets: give the capture that the sound was taken from",
}


def container_of(head: bytes) -> str:
    """``pcap`` or ``pcapng``, empty where the first octets are of neither."""
    return next((name for magic, name in CONTAINERS.items() if head.startswith(magic)), "")


def refusal(head: bytes, length: int) -> str:
    """Why a file of ``length`` octets that begins with ``head`` cannot be read, and what to do; empty if it can.

    ``head`` are the first ``HEAD`` octets at least, or all.
    """
    if length == 0:
        return "is empty: check that the capture was running and was closed, and copy it again"
    container = container_of(head)
    if container:
        if length >= SHORTEST[container]:
            return ""
        return f"ends at offset {length}, within the {container} file header: copy it again from where it was taken"
    if head[:4] in MODIFIED_PCAP:
        return f"is a variant of pcap (magic number {head[:4].hex()}) with other records: convert it to pcapng first"
    for magic, what in OTHERS.items():
        if head.startswith(magic):
            return what
    if is_text(head):
        return "holds text, no capture: give a pcap or pcapng file"
    first = head[:4].hex(" ")
    return (
        f"has {first} at offset 0, which begins no pcap or pcapng file: give one, plain or compressed (gzip, xz, zstd)"
    )


def is_text(head: bytes) -> bool:
    """Whether the first octets read as text."""
    if head.startswith((b"\xff\xfe", b"\xfe\xff")):
        head = head[2:].replace(b"\0", b"")
    letters = head.decode("utf-8", "ignore")
    # A character may be cut at the end of the head.
    whole = len(head) - len(letters.encode()) <= 3
    return whole and bool(letters) and all(letter.isprintable() or letter in "\t\r\n\f\ufeff" for letter in letters)
