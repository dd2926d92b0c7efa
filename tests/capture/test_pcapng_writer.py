"""What is written is read back by the reader of this room and by dpkt's."""

import io

import dpkt

from rtpaudit.capture.frames import Interface
from rtpaudit.capture.pcapng_writer import PcapngWriter, section_header
from tests.capture.reading import Frame, read
from tests.craft import START_NS, rtp_frame

FRAMES = [rtp_frame(number)[: 60 + number] for number in range(5)]
TIMES = [START_NS + 20_000_001 * number for number in range(5)]


def written() -> bytes:
    file = io.BytesIO()
    writer = PcapngWriter(file, "a test")
    wired = writer.interface(Interface(1, "eth0", 262144))
    cooked = writer.interface(Interface(113))
    for k, (octets, time_ns) in enumerate(zip(FRAMES, TIMES, strict=True)):
        writer.frame(cooked if k == 3 else wired, time_ns, octets, 300)
    writer.statistics(wired, TIMES[-1], 1000, 7)
    writer.statistics(cooked, TIMES[-1], None, None)
    return file.getvalue()


def test_frames_lengths_times_and_interfaces_come_back() -> None:
    reading = read(written())
    interfaces = [0, 0, 0, 1, 0]
    rows = zip(FRAMES, TIMES, interfaces, strict=True)
    assert reading.frames == [Frame(octets, 300, time_ns, interface) for octets, time_ns, interface in rows]
    assert [(one.link_type, one.name, one.snap_length) for one in reading.interfaces] == [
        (1, "eth0", 262144),
        (113, "", 0),
    ]
    assert [(one.received, one.dropped) for one in reading.interfaces] == [(1000, 7), (None, None)]
    assert reading.damage == []


def test_another_reader_finds_the_same_frames() -> None:
    assert [octets for _, octets in dpkt.pcapng.Reader(io.BytesIO(written()))] == FRAMES


def test_a_file_tells_who_wrote_it_at_its_begin() -> None:
    assert written().startswith(section_header("a test"))
    assert b"a test" in section_header("a test")


def test_a_file_without_frames_is_sound() -> None:
    file = io.BytesIO()
    PcapngWriter(file, "a test")
    assert len(file.getvalue()) % 4 == 0
    assert read(file.getvalue()).frames == []
