"""The columns of a batch while they are filled."""

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Frames, Interface, Octets


class FrameColumns:
    """Room for ``size`` frames, of which ``rows`` are filled, and for one more that is put right by hand."""

    def __init__(self, size: int) -> None:
        self.size = size
        self.rows = 0
        size += 1
        self.start = np.empty(size, np.int64)
        self.captured = np.empty(size, np.int32)
        self.original = np.empty(size, np.int32)
        self.time_ns = np.empty(size, np.int64)
        self.interface = np.zeros(size, np.uint16)

    def free(
        self,
    ) -> tuple[NDArray[np.int64], NDArray[np.int32], NDArray[np.int32], NDArray[np.int64], NDArray[np.uint16]]:
        """What is still to be filled of each column."""
        rest = slice(self.rows, self.size)
        return self.start[rest], self.captured[rest], self.original[rest], self.time_ns[rest], self.interface[rest]

    def append(self, start: int, captured: int, original: int, time_ns: int) -> None:
        """One frame of the first interface."""
        row = self.rows
        self.start[row], self.captured[row] = start, captured
        self.original[row], self.time_ns[row] = original, time_ns
        self.rows += 1

    def end_last(self, end: int, original: int) -> None:
        """Let the last frame end at ``end``; ``original`` is what its header says it had on the wire."""
        held = end - int(self.start[self.rows - 1])
        self.captured[self.rows - 1] = held
        self.original[self.rows - 1] = original if held <= original < 1 << 31 else held

    def last_start(self) -> int:
        """First octet of the last frame, 0 where there is none."""
        return int(self.start[self.rows - 1]) if self.rows else 0

    def latest_ns(self) -> int | None:
        """Latest time, None where there is no frame."""
        return int(self.time_ns[: self.rows].max()) if self.rows else None

    def frames(self, octets: Octets, interfaces: list[Interface], first_number: int) -> Frames:
        """The filled rows as a batch."""
        filled = slice(0, self.rows)
        return Frames(
            octets=octets,
            start=self.start[filled],
            captured=self.captured[filled],
            original=self.original[filled],
            time_ns=self.time_ns[filled],
            interface=self.interface[filled],
            interfaces=tuple(interfaces),
            first_number=first_number,
        )
