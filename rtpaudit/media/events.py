"""Telephone events (RFC 4733) of a stream: keys pressed, told apart from the audio that they interrupt.

An event is told by many packets of one timestamp, the last of them three times; any of them may be lost.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Octets
from rtpaudit.media.streams import Content, Stream, StreamPackets
from rtpaudit.units import MS_PER_S

DIGITS = "0123456789*#ABCD"
FLASH = 16
LONGEST_DURATION = 0xFFFF
"""what one packet can tell; a longer event goes on in segments (RFC 4733, 2.5.1.3)"""
EVENT_OCTETS = 4
MOST_EVENTS_A_PACKET = 64


@dataclass(slots=True)
class TelephoneEvent:
    """One event, put together from all packets that told of it."""

    code: int
    time_ns: int
    """arrival of the first packet that told of it"""
    begin_ticks: int
    """of the stream's media time"""
    duration_ticks: int
    clock_rate_hz: int
    level_dbm0: float
    packets: int
    """that told of it; 0 where only copies within later packets do"""
    end_seen: bool

    @property
    def digit(self) -> str:
        """The key, "" where the event is none."""
        return DIGITS[self.code] if self.code < len(DIGITS) else ""

    @property
    def name(self) -> str:
        """Kind of event (RFC 4733, 3.2)."""
        return "digit" if self.digit else "flash" if self.code == FLASH else f"event {self.code}"

    @property
    def begin_s(self) -> float:
        """Begin, in seconds of the stream. [s]"""
        return self.begin_ticks / self.clock_rate_hz if self.clock_rate_hz else float("nan")

    @property
    def duration_ms(self) -> float:
        """How long it lasted, as far as packets told. [ms]"""
        return self.duration_ticks * MS_PER_S / self.clock_rate_hz if self.clock_rate_hz else float("nan")


def telephone_events(stream: Stream, buffers: Sequence[Octets]) -> list[TelephoneEvent]:
    """Events of a stream by their begin; ``buffers`` are those of its recording.

    Repeated ends count as one event, and a lost begin is known from the timestamp of what did arrive. Payloads too
    short to hold an event are passed over.
    """
    found: list[TelephoneEvent] = []
    for packets, row, copied in _in_order(stream):
        start = int(packets.start[row])
        octets = buffers[packets.buffer[row]][start : start + int(packets.captured[row])].tobytes()
        rate = stream.encodings[int(packets.payload_type[row])].clock_rate_hz
        begin = int(packets.media_ticks[row])
        # Several events in one packet follow each other in time (RFC 4733, 2.5.1.5).
        for at in range(0, min(len(octets), EVENT_OCTETS * MOST_EVENTS_A_PACKET) - EVENT_OCTETS + 1, EVENT_OCTETS):
            duration = int.from_bytes(octets[at + 2 : at + 4], "big")
            told = TelephoneEvent(
                code=octets[at],
                time_ns=int(packets.time_ns[row]),
                begin_ticks=begin,
                duration_ticks=duration,
                clock_rate_hz=rate,
                level_dbm0=-float(octets[at + 1] & 0x3F),
                packets=int(not copied),
                end_seen=octets[at + 1] >= 0x80,
            )
            _add(found, told)
            begin += duration
    return found


def _in_order(stream: Stream) -> list[tuple[StreamPackets, int, bool]]:
    """Packets that tell of events, in order of the stream; copies (RFC 4733, 2.6; RFC 2198) stand with their event."""
    packets, copies = stream.packets, stream.told_again
    rows = np.flatnonzero((packets.content == Content.EVENT) & ~packets.duplicate)
    rows = rows[np.lexsort((packets.extended[rows], packets.segment[rows]))]
    own = [(packets, row, False) for row in rows.tolist()]
    if copies is None:
        return own
    both = own + [(copies, row, True) for row in range(len(copies))]
    return sorted(both, key=lambda one: (*(int(column[one[1]]) for column in _place(one[0])), one[2]))


def _place(packets: StreamPackets) -> tuple[NDArray[np.integer], ...]:
    return packets.segment, packets.media_ticks, packets.extended


def _add(found: list[TelephoneEvent], told: TelephoneEvent) -> None:
    """Let a packet add to the event that it tells of, or begin a new one."""
    for event in found[-2:]:
        offset = told.begin_ticks - event.begin_ticks
        # A segment of a long event begins where the one before ran out of room for its duration.
        segment = offset > 0 and offset % LONGEST_DURATION == 0 and offset <= event.duration_ticks
        if event.code == told.code and (offset == 0 or segment):
            event.duration_ticks = max(event.duration_ticks, offset + told.duration_ticks)
            event.packets += told.packets
            event.time_ns = min(event.time_ns, told.time_ns)
            event.end_seen |= told.end_seen
            return
    found.append(told)
