"""Captures read in one call, as rows that a test can compare."""

from pathlib import Path
from typing import NamedTuple

import numpy as np

from rtpaudit.capture.damage import DamageLog
from rtpaudit.capture.files import CaptureFile, open_file
from rtpaudit.capture.frames import Damage, Interface
from rtpaudit.capture.pcap import PcapReader
from rtpaudit.capture.pcapng import PcapngReader


class Frame(NamedTuple):
    """One frame as it was read."""

    octets: bytes
    original: int
    time_ns: int
    interface: int


class Reading(NamedTuple):
    """All that a capture gave."""

    frames: list[Frame]
    interfaces: list[Interface]
    damage: list[Damage]

    @property
    def octets(self) -> list[bytes]:
        """The frames alone."""
        return [frame.octets for frame in self.frames]

    @property
    def times_ns(self) -> list[int]:
        """Their times."""
        return [frame.time_ns for frame in self.frames]


def read(capture: bytes, size: int = 1000) -> Reading:
    """Read octets that begin with a pcap or pcapng header."""
    octets = np.frombuffer(capture, np.uint8)
    kind = PcapngReader if capture[:4] == b"\n\r\r\n" else PcapReader
    reader = kind(octets, DamageLog("made.pcap"))
    return Reading(_frames(reader, size), reader.interfaces, reader.damage.rows)


def read_file(path: str | Path, size: int = 1000) -> Reading:
    """Read a file through the door of the room."""
    file = open_file(str(path))
    return Reading(_frames(file, size), file.interfaces, file.damage)


def _frames(source: PcapReader | PcapngReader | CaptureFile, size: int) -> list[Frame]:
    rows = []
    number = 1
    for batch in source.batches(size):
        assert 0 < len(batch) <= size + 1
        assert batch.first_number == number
        assert (batch.captured >= 0).all()
        assert (batch.original >= batch.captured).all()
        assert (batch.start + batch.captured <= len(batch.octets)).all()
        assert (batch.interface < len(batch.interfaces)).all()
        number += len(batch)
        columns = (batch.start, batch.captured, batch.original, batch.time_ns, batch.interface)
        for start, captured, original, time_ns, interface in zip(*(one.tolist() for one in columns), strict=True):
            rows.append(Frame(batch.octets[start : start + captured].tobytes(), original, time_ns, interface))
    return rows
