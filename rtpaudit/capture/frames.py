"""What the capture room hands on: frames as columns over one octet buffer, and the damage met on the way."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Octets = NDArray[np.uint8]


@dataclass(frozen=True, slots=True)
class Damage:
    """Something that could not be read. A row of the damage table."""

    capture: str
    """base name of the file"""
    offset: int
    """octet in the file (decompressed, where it was compressed) at which reading failed"""
    what: str
    """what was found there, one clause"""
    lost: str
    """what the audit does without, one clause"""


@dataclass(slots=True)
class Interface:
    """One capture interface of one file."""

    link_type: int
    """LINKTYPE number of the file format"""
    name: str = ""
    snap_length: int = 0
    """0 where there is no limit"""
    received: int | None = None
    """frames that the capture host says it received, from interface statistics"""
    dropped: int | None = None
    """frames that the capture host says it dropped, from interface statistics"""


@dataclass(frozen=True, slots=True)
class Frames:
    """A batch of frames in file order. All columns have shape (n,)."""

    octets: Octets
    """the whole file as a read-only map; nothing is copied"""
    start: NDArray[np.int64]
    """first octet of each frame within ``octets``"""
    captured: NDArray[np.int32]
    """octets of the frame that the file holds; start + captured never passes the end of ``octets``"""
    original: NDArray[np.int32]
    """octets that the frame had on the wire; never below ``captured``"""
    time_ns: NDArray[np.int64]
    """arrival, ns since 1970-01-01 UTC; a simple packet block carries none and has that of the frame before"""
    interface: NDArray[np.uint16]
    """index into ``interfaces``"""
    interfaces: tuple[Interface, ...]
    """all interfaces that the file has described so far"""
    first_number: int
    """number of the first frame of the batch within the file, counted from 1"""

    def __len__(self) -> int:
        return len(self.start)
