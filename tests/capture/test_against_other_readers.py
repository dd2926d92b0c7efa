"""Every capture among the fixtures, frame by frame, against the readers of dpkt and scapy and a slow one of our own."""

import gzip
import io
from pathlib import Path

import dpkt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.capture.reading import read, read_file
from tests.craft import pcap
from tests.naive import captures as naive

CAPTURES = sorted((Path(__file__).parents[2] / "fixtures" / "captures").glob("*.pcap*"))
EACH = pytest.mark.parametrize("path", CAPTURES, ids=lambda path: path.name)


def test_there_are_fixtures_of_both_containers() -> None:
    assert {path.suffix for path in CAPTURES} >= {".pcap", ".pcapng", ".gz"}


@EACH
def test_frames_times_and_lengths_are_those_that_scapy_reads(path: Path) -> None:
    from scapy.utils import RawPcapNgReader, RawPcapReader

    plain = gzip.decompress(path.read_bytes()) if path.suffix == ".gz" else path.read_bytes()
    expected = []
    if plain[:4] == b"\n\r\r\n":
        for octets, meta in RawPcapNgReader(io.BytesIO(plain)):
            ticks = meta.tshigh << 32 | meta.tslow
            expected.append((octets, meta.wirelen, ticks * 10**9 // meta.tsresol))
    else:
        reader = RawPcapReader(io.BytesIO(plain))
        for octets, meta in reader:
            expected.append((octets, meta.wirelen, meta.sec * 10**9 + meta.usec * (1 if reader.nano else 1000)))
    assert [frame[:3] for frame in read_file(path).frames] == expected


@pytest.mark.parametrize("path", [path for path in CAPTURES if path.suffix == ".pcap"], ids=lambda path: path.name)
def test_frames_are_those_that_dpkt_reads(path: Path) -> None:
    with path.open("rb") as file:
        reader = dpkt.pcap.UniversalReader(file)
        expected = [(octets, round(time * 1_000_000)) for time, octets in reader]
    assert [(frame.octets, round(frame.time_ns / 1000)) for frame in read_file(path).frames] == expected


FRAME = st.tuples(st.binary(min_size=1, max_size=80), st.integers(0, 3_000_000), st.integers(0, 2000))


@settings(max_examples=300)
@given(
    rows=st.lists(FRAME, max_size=30),
    from_s=st.integers(0, 2**32 - 1000),
    nanoseconds=st.booleans(),
    big=st.booleans(),
    size=st.integers(1, 40),
)
def test_made_captures_read_as_the_slow_reader_reads_them(
    rows: list[tuple[bytes, int, int]], from_s: int, nanoseconds: bool, big: bool, size: int
) -> None:
    frames = [frame for frame, _, _ in rows]
    times = [from_s * 10**9 + 1000 * step * row for row, (_, step, _) in enumerate(rows)]
    originals = [len(frame) + cut for frame, _, cut in rows]
    capture = pcap(frames, times, originals=originals, nanoseconds=nanoseconds, big_endian=big)
    reading = read(capture, size)
    assert [(frame.time_ns, frame.octets, frame.original) for frame in reading.frames] == naive.pcap_frames(capture)
    assert reading.damage == []
