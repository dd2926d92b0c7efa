"""Files given together: which of them are one recording, and which are captures of their own."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import takewhile
from os.path import dirname
from pathlib import Path

import numpy as np

from rtpaudit.capture.files import CaptureFile, base_name, open_file, shown
from rtpaudit.capture.frames import Damage
from rtpaudit.errors import UnreadableCapture, UnusableArguments
from rtpaudit.units import NS_PER_S

MOST_OVERLAP_NS = NS_PER_S
"""Files of a ring overlap by no more than this; two capture points do."""


@dataclass(frozen=True, slots=True)
class Recording:
    """Files that go on from one to the next, in order of time."""

    name: str
    """base name of the first file"""
    files: tuple[CaptureFile, ...]

    @property
    def damage(self) -> list[Damage]:
        """What could not be read of all files so far."""
        return [row for file in self.files for row in file.damage]


@dataclass(frozen=True, slots=True)
class Extent:
    """A file with what decides where it belongs."""

    file: CaptureFile
    link_types: tuple[int, ...]
    first_ns: int
    last_ns: int
    """last time of the ring so far"""


def open_recordings(paths: Sequence[str | Path]) -> list[Recording]:
    """Open captures and put files of one recording together, in order of their first frames.

    Files of one link type that overlap by at most 1 s are one recording, others are recordings of their own. So the
    same capture given twice is two recordings, unless it is shorter than that. A file of which nothing can be read
    becomes a recording without frames that holds its damage, as long as another can be read. ``-`` is standard input.

    Raises
    ------
    UnreadableCapture
        If nothing at all can be read.
    UnusableArguments
        If there are no paths.
    """
    if not paths:
        raise UnusableArguments("no capture is named: give at least one file, or - for standard input")
    opened: list[CaptureFile] = []
    refused: list[tuple[str, UnreadableCapture]] = []
    for path in map(str, paths):
        try:
            opened.append(open_file(path))
        except UnreadableCapture as fault:
            refused.append((path, fault))
    if not opened:
        others = f" (and nothing of the other files given, {len(refused)} in all)" if len(refused) > 1 else ""
        raise UnreadableCapture(f"{refused[0][1]}{others}")
    recordings = group(opened) if len(opened) > 1 else [Recording(opened[0].name, (opened[0],))]
    return recordings + [_refused(path, fault) for path, fault in refused]


def _refused(path: str, fault: UnreadableCapture) -> Recording:
    name = base_name(path)
    row = Damage(name, 0, str(fault).removeprefix(f"{shown(path)}: "), "the whole file")
    nothing = np.empty(0, np.uint8)
    nothing.flags.writeable = False
    return Recording(name, (CaptureFile(path, name, "", nothing, [row]),))


def group(files: Sequence[CaptureFile]) -> list[Recording]:
    """Recordings by first time; files without frames come last, each on its own."""
    extents = [_extent(file) for file in files]
    rings: list[list[Extent]] = []
    for extent in sorted((one for one in extents if one is not None), key=lambda one: one.first_ns):
        fitting = [ring for ring in rings if _goes_on(ring, extent)]
        if fitting:
            ring = max(fitting, key=lambda ring: _likeness(ring[-1], extent))
            ring.append(replace(extent, last_ns=max(extent.last_ns, ring[-1].last_ns)))
        else:
            rings.append([extent])
    grouped = [tuple(extent.file for extent in ring) for ring in rings]
    grouped += [(file,) for file, extent in zip(files, extents, strict=True) if extent is None]
    return [Recording(ring[0].name, ring) for ring in grouped]


def _extent(file: CaptureFile) -> Extent | None:
    span = file.span_ns()
    link_types = tuple(sorted({interface.link_type for interface in file.interfaces}))
    return Extent(file, link_types, *span) if span else None


def _goes_on(ring: list[Extent], extent: Extent) -> bool:
    return ring[-1].link_types == extent.link_types and ring[-1].last_ns - extent.first_ns <= MOST_OVERLAP_NS


def _likeness(last: Extent, extent: Extent) -> tuple[bool, bool, int, int]:
    """How well a file follows another, where several rings would have it: two capture points may rotate at one time."""
    a, b = last.file, extent.file
    alike = a.container == b.container and _described(a) == _described(b)
    shared = sum(1 for _ in takewhile(lambda pair: pair[0] == pair[1], zip(a.name, b.name, strict=False)))
    return alike, dirname(a.path) == dirname(b.path), shared, -abs(extent.first_ns - last.last_ns)


def _described(file: CaptureFile) -> list[tuple[str, int]]:
    return [(interface.name, interface.snap_length) for interface in file.interfaces]
