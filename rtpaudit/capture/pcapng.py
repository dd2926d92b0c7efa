"""pcapng: sections of blocks, each section with its own byte order and interfaces."""

import struct
from collections.abc import Iterator

import numpy as np

from rtpaudit.capture import pcapng_blocks as blocks
from rtpaudit.capture.columns import FrameColumns
from rtpaudit.capture.damage import DamageLog, octets_text
from rtpaudit.capture.frames import Frames, Interface, Octets
from rtpaudit.capture.pcapng_options import NO_LIMIT, describe, statistics

SECTION_HEADER_LENGTH = 28
PACKET_HEADER = 28
MOST_INTERFACES = 1 << 16
"""Over all sections: what the column of interfaces can number."""
MOST_RARE_BLOCKS = 1_000_000
"""Section headers, interface descriptions and statistics are read one by one: a file of nothing else has to end."""
MOST_OPTION_OCTETS = 1 << 16
MOST_TRAILING_OCTETS = 64
"""Behind a frame in its block: padding, options and a length. More than that were blocks of their own."""
LONGEST_FRAME = 1 << 20


class PcapngReader:
    """One pass over a pcapng file."""

    def __init__(self, octets: Octets, damage: DamageLog) -> None:
        self.octets = octets
        self.damage = damage
        self.position = 0
        self.interfaces: list[Interface] = []
        self._big = False
        self._first = 0
        self._trusted = self._trusted_end = -1
        self._rare_blocks = 0
        self._table = np.zeros((16, 5), np.int64)
        self._stated: set[int] = set()
        self._state = np.zeros(7, np.int64)
        self._state[blocks.LAST_TIME] = blocks.UNKNOWN_TIME

    def batches(self, size: int) -> Iterator[Frames]:
        """Frames in file order, at most ``size`` at a time. A simple packet block has the time of the frame before."""
        first_number = 1
        while self.position < len(self.octets):
            columns = FrameColumns(min(size, (len(self.octets) - self.position) // 16 + 1))
            self._fill(columns)
            self._settle(columns)
            if columns.rows:
                yield columns.frames(self.octets, self.interfaces, first_number)
            first_number += columns.rows
        self._report_counts()

    def last_time_ns(self, tail: int) -> int | None:
        """Latest time among the blocks behind ``tail``, None where they do not lead to the end of the file.

        They are taken to belong to the section that was read last, which holds if it is the only one.
        """
        self.position = blocks.find_block(self.octets, tail, self._big)
        if self.position < 0:
            return None
        columns = FrameColumns((len(self.octets) - self.position) // 16 + 1)
        before = self._strangeness()
        self._fill(columns)
        sound = self.damage.only_from(columns.last_start() - PACKET_HEADER) and self._strangeness() == before
        return columns.latest_ns() if sound else None

    def _strangeness(self) -> tuple[int, ...]:
        return len(self.interfaces), int(self._state[blocks.HOMELESS]), int(self._state[blocks.UNTIMED])

    def _fill(self, columns: FrameColumns) -> None:
        while True:
            rows, self.position, stopped = blocks.index_blocks(
                self.octets, self.position, self._big, self._trusted, self._trusted_end,
                self._first, len(self.interfaces) - self._first, self._table, self._state, *columns.free(),
            )  # fmt: skip
            columns.rows += rows
            if stopped in (blocks.COMPLETE, blocks.FULL):
                return
            if stopped == blocks.BROKEN or not self._read_rare():
                self._mend()

    def _settle(self, columns: FrameColumns) -> None:
        """Give untimed frames at the head of a file the first time, and interfaces the drops noted in frames."""
        times = columns.time_ns[: columns.rows]
        if columns.rows and times[0] == blocks.UNKNOWN_TIME:
            known = np.flatnonzero(times != blocks.UNKNOWN_TIME)
            times[: known[0] if len(known) else None] = times[known[0]] if len(known) else 0
        for row in np.flatnonzero(self._table[: len(self.interfaces), blocks.DROPPED]):
            if int(row) not in self._stated:
                self.interfaces[row].dropped = int(self._table[row, blocks.DROPPED])

    def _read_rare(self) -> bool:
        """Read the block at the position and pass it; False where it is damaged."""
        self._rare_blocks += 1
        if self._rare_blocks > MOST_RARE_BLOCKS:
            return self._give_up(f"more than {MOST_RARE_BLOCKS:,} blocks that describe sections and interfaces")
        kind, total = struct.unpack(self._order("II"), self.octets[self.position : self.position + 8].tobytes())
        if kind == blocks.SECTION_HEADER:
            return self._read_section()
        end = self._trusted_end if self.position == self._trusted else self.position + total
        body = self.octets[self.position + 8 : min(end - 4, self.position + MOST_OPTION_OCTETS)].tobytes()
        if kind == blocks.STATISTICS:
            self._read_statistics(body)
        elif len(self.interfaces) == MOST_INTERFACES:
            return self._give_up(f"more than {MOST_INTERFACES:,} interfaces")
        else:
            self._read_interface(body)
        self.position = end
        return True

    def _order(self, fields: str) -> str:
        return (">" if self._big else "<") + fields

    def _read_section(self) -> bool:
        head = self.octets[self.position : self.position + SECTION_HEADER_LENGTH].tobytes()
        if len(head) < SECTION_HEADER_LENGTH:
            return False
        orders = [
            big for big in (False, True) if head[8:12] == blocks.BYTE_ORDER.to_bytes(4, "big" if big else "little")
        ]
        if not orders:
            return False
        self._big, self._first = orders[0], len(self.interfaces)
        total, _, major, minor = struct.unpack_from(self._order("IIHH"), head, 4)
        end = self.position + total
        if self.position == self._trusted:
            end = self._trusted_end
        elif (
            total < SECTION_HEADER_LENGTH
            or blocks.block_end(self.octets, self.position, self._big) != end
            or end > len(self.octets)
        ):
            return False
        if major != 1:
            self.damage.add(self.position, f"a section of the unknown version {major}.{minor}", "nothing, if 1.0 fits")
        self.position = end
        return True

    def _read_interface(self, body: bytes) -> None:
        if len(body) < 8:
            self.damage.add(self.position, "an interface description that is too short", "the frames of this interface")
        interface, unit = describe(body, self._big)
        if len(self.interfaces) == len(self._table):
            self._table = np.concatenate([self._table, np.zeros_like(self._table)])
        self._table[len(self.interfaces)] = [*unit, interface.snap_length or NO_LIMIT, 0]
        self.interfaces.append(interface)

    def _read_statistics(self, body: bytes) -> None:
        which, received, dropped = statistics(body, self._big)
        row = self._first + which
        if not self._first <= row < len(self.interfaces):
            return
        # Statistics count from the start of the capture: the last ones hold, and go before the frames' own counts.
        if received is not None:
            self.interfaces[row].received = received
        if dropped is not None:
            self.interfaces[row].dropped = dropped
            self._stated.add(row)

    def _mend(self) -> None:
        """Read a block with a wrong length up to where the next one begins, or pass over what is none."""
        broken, size = self.position, len(self.octets)
        if broken == size:
            return
        total = struct.unpack(self._order("I"), self.octets[broken + 4 : broken + 8].tobytes().ljust(4, b"\0"))[0]
        end = broken + total
        followed = end == size or (end < size and blocks.block_end(self.octets, end, self._big) >= 0)
        if total >= 12 and followed and self._trust(end):
            self.damage.add(broken, "a block whose two lengths disagree", "nothing")
            return
        found = blocks.find_block(self.octets, broken + 1, self._big)
        next_one = size if found < 0 else found
        cut = found < 0 and end > size
        if cut and size - broken >= SECTION_HEADER_LENGTH and self._trust(size):
            self.damage.add(broken, f"the file ends within a block of {octets_text(total)}", octets_text(end - size))
            return
        if self._frame_end(broken) <= next_one and self._trust(next_one):
            lost = next_one - self._frame_end(broken)
            what = f"a block of {octets_text(total)} that does not fit what follows"
            self.damage.add(broken, what, octets_text(lost) if lost > MOST_TRAILING_OCTETS else "nothing")
            return
        self.position = next_one
        what = "the file ends within a block" if cut else "octets that are no block"
        self.damage.add(broken, what, octets_text(next_one - broken))

    def _trust(self, end: int) -> bool:
        """Have the block at the position read up to ``end``, unless that has been tried."""
        if self._trusted == self.position:
            return False
        self._trusted, self._trusted_end = self.position, end
        return True

    def _frame_end(self, at: int) -> int:
        """End of the frame in a packet block whose header is sound but for its length, else past the file."""
        nowhere = len(self.octets) + 1
        head = self.octets[at : at + PACKET_HEADER].tobytes()
        if len(head) < PACKET_HEADER:
            return nowhere
        kind, _, interface, _, _, captured, original = struct.unpack(self._order("7I"), head)
        if kind == blocks.OBSOLETE_PACKET:
            interface = struct.unpack_from(self._order("H"), head, 8)[0]
        elif kind != blocks.ENHANCED_PACKET:
            return nowhere
        described = interface < len(self.interfaces) - self._first
        return at + PACKET_HEADER + captured if described and 0 < captured <= original <= LONGEST_FRAME else nowhere

    def _give_up(self, what: str) -> bool:
        self.damage.add(self.position, what, octets_text(len(self.octets) - self.position))
        self.position = len(self.octets)
        return True

    def _report_counts(self) -> None:
        for count, what, lost in (
            (blocks.CLIPPED, "packet blocks too small for the frame that they announce", "the ends of these frames"),
            (blocks.HOMELESS, "packet blocks of an interface that is not described", "these frames"),
            (blocks.UNTIMED, "packet blocks without a time stamp", "their times: each has that of the frame before"),
        ):
            if self._state[count]:
                self.damage.add(int(self._state[count + 1]), f"{int(self._state[count]):,} {what}", lost)
