"""Content decides; and every other thing that people hand over is named, with what to do."""

import pytest

from rtpaudit.capture.recognise import HEAD, container_of, refusal
from tests.craft import pcap, pcapng, rtp_frame

FRAMES = [rtp_frame(0)]


@pytest.mark.parametrize("big", [False, True])
def test_captures_are_known_by_their_first_octets(big: bool) -> None:
    for capture, container in (
        (pcap(FRAMES, big_endian=big), "pcap"),
        (pcap(FRAMES, nanoseconds=True, big_endian=big), "pcap"),
        (pcapng(FRAMES, big_endian=big), "pcapng"),
    ):
        assert container_of(capture[:HEAD]) == container
        assert refusal(capture[:HEAD], len(capture)) == ""


@pytest.mark.parametrize(
    ("octets", "clause"),
    [
        (b"", "is empty"),
        (pcap([])[:23], "ends at offset 23, within the pcap file header"),
        (pcapng([])[:27], "ends at offset 27, within the pcapng file header"),
        (b"\x34\xcd\xb2\xa1" + bytes(60), "is a variant of pcap (magic number 34cdb2a1)"),
        (b"\xa1\xb2\xcd\x34" + bytes(60), "is a variant of pcap (magic number a1b2cd34)"),
        (b"BZh91AY&SY" + bytes(60), "is compressed by bzip2"),
        (b"\x04\x22\x4d\x18" + bytes(60), "is compressed by lz4"),
        (b"PK\x03\x04" + bytes(60), "is a zip archive"),
        (b"snoop\0\0\0" + bytes(60), "is a capture of the format of RFC 1761"),
        (b"RIFF" + bytes(60), "holds sound"),
        (b"INVITE sip:fabian@example.com SIP/2.0\r\n", "holds text"),
        ("Grüße aus dem Leitstand".encode(), "holds text"),
        ("Grüße".encode()[:3], "holds text"),
        ("INVITE".encode("utf-16"), "holds text"),
        (b"\x00\x01\x02\x03" + bytes(60), "has 00 01 02 03 at offset 0"),
        (b"\xd4\xc3", "has d4 c3 at offset 0"),
    ],
)
def test_what_is_no_capture_is_told_apart(octets: bytes, clause: str) -> None:
    reason = refusal(octets[:HEAD], len(octets))
    assert reason.startswith(clause)
    what, do = reason.split(": ", 1)
    assert what
    assert do
    assert "\n" not in reason
