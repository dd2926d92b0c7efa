"""The excerpt: the frames of some calls as a pcapng file of their own, to pass on."""

import os
from collections.abc import Sequence
from pathlib import Path
from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture import Recording
from rtpaudit.capture.frames import Interface
from rtpaudit.capture.pcapng_writer import PcapngWriter, section_header
from rtpaudit.errors import UnusableArguments, UnusableOutput
from rtpaudit.media.calls import Call
from rtpaudit.report.chosen_frames import Heard, frames_of

APPLICATION = "rtpaudit excerpt"
"""by which such a file is known to be ours, and may be replaced"""


def refuse_excerpt(path: Path, captures: Sequence[str | Path] = ()) -> None:
    """Refuse a place that holds anything but an earlier excerpt, or where no file can be.

    Raises
    ------
    UnusableOutput
        If a file is there that is no excerpt, or is one of the captures, or the folder is missing.
    """
    if not path.parent.is_dir():
        raise UnusableOutput(f"{path}: there is no such folder to write the excerpt to; make it first")
    if path.is_dir():
        raise UnusableOutput(f"{path}: is a folder; name a file for the excerpt")
    if not path.exists():
        return
    if any(Path(capture).exists() and path.samefile(capture) for capture in captures):
        raise UnusableOutput(f"{path}: is itself a capture to be read; choose another name for the excerpt")
    head = section_header(APPLICATION)
    try:
        with open(path, "rb") as file:
            ours = file.read(len(head)) == head
    except OSError:
        ours = False
    if not ours:
        raise UnusableOutput(f"{path}: is there and is no excerpt of rtpaudit; choose another name, or move it away")


def paths_of(path: Path, recordings: int) -> list[Path]:
    """A file for each recording: that of the first is ``path``, others have a number before the ending."""
    return [path, *(path.with_name(f"{path.stem}-{k}{path.suffix}") for k in range(2, recordings + 1))]


def write_excerpt(path: Path, legs: Sequence[Call], heard: Sequence[Heard]) -> list[Path]:
    """Write the frames of some calls, whole or not at all; the files that were written.

    Recordings are not put into one file, as captures of two points would be taken for one: each has its own.

    Raises
    ------
    UnusableOutput
        Where a file cannot be written, or is not ours to replace.
    UnusableArguments
        If there is no call.
    """
    numbers = sorted({leg.recording for leg in legs})
    if not numbers:
        raise UnusableArguments("there is no call to write an excerpt of")
    paths = paths_of(path, len(numbers))
    for one in paths:
        refuse_excerpt(one)
    partial = [one.with_name(f".{one.name}.partial-{os.getpid()}") for one in paths]
    try:
        for place, number in zip(partial, numbers, strict=True):
            mine = [leg for leg in legs if leg.recording == number]
            with open(place, "xb") as file:
                _write(file, heard[number].recording, frames_of(mine, heard[number]))
        for place, one in zip(partial, paths, strict=True):
            place.replace(one)
    except OSError as fault:
        raise UnusableOutput(f"{path}: cannot be written: {fault.strerror or fault}; choose another name") from fault
    finally:
        for place in partial:
            place.unlink(missing_ok=True)
    return paths


def _write(file: BinaryIO, recording: Recording, wanted: Sequence[NDArray[np.int64]]) -> None:
    """The wanted frames of each file, in their order."""
    writer = PcapngWriter(file, APPLICATION)
    known: dict[tuple[int, str, int, int], int] = {}
    for one, numbers in zip(recording.files, wanted, strict=True):
        if not len(numbers):
            continue
        # Files of a ring go on with the interfaces of the file before; those of one file stay apart.
        own: dict[int, int] = {}
        last_ns = 0
        for frames in one.batches():
            first = frames.first_number
            rows = numbers[np.searchsorted(numbers, first) : np.searchsorted(numbers, first + len(frames))] - first
            columns = (frames.interface, frames.time_ns, frames.start, frames.captured, frames.original)
            for interface, time_ns, start, captured, original in zip(*(c[rows].tolist() for c in columns), strict=True):
                if interface not in own:
                    own[interface] = _described(writer, frames.interfaces[interface], interface, known)
                octets = frames.octets[start : start + captured].tobytes()
                writer.frame(own[interface], time_ns, octets, original)
                last_ns = max(last_ns, time_ns)
        for interface, number in own.items():
            counts = one.interfaces[interface]
            writer.statistics(number, last_ns, counts.received, counts.dropped)


def _described(writer: PcapngWriter, one: Interface, place: int, known: dict[tuple[int, str, int, int], int]) -> int:
    key = (one.link_type, one.name, one.snap_length, place)
    if key not in known:
        known[key] = writer.interface(one)
    return known[key]
