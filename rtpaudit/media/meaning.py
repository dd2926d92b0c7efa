"""What the payload types of a group of packets mean: the user's word, the offer's, RFC 3551, or what packets show."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Octets
from rtpaudit.media.rtp import RtpRows
from rtpaudit.media.streams import Content
from rtpaudit.metrics.clock import infer_clock_rate
from rtpaudit.signalling.payload_types import OLD_COMFORT_NOISE, STATIC, Encoding

Offered = Callable[[int, int, int], Encoding | None]
"""(flow, payload type, arrival in ns) to what the offer in force said, None where nothing was said."""

UNKNOWN = Encoding("unknown", 0, 0)
VIDEO_CLOCK_HZ = 90_000
LARGEST_AUDIO_FRAME_OCTETS = 320
"""of what the speech payload formats put into one packet of 20 ms, PCM at 8 kHz included (common practice)"""
ENOUGH_PACKETS = 10
"""to infer a clock from, beside the audio of most packets"""
HIGHEST_TELEPHONE_EVENT = 16
"""RFC 4733, 3.2: sixteen digits and the hook flash; the codes above belong to other equipment."""
CONTENT_OF = {
    "telephone-event": Content.EVENT,
    "CN": Content.COMFORT_NOISE,
    "red": Content.REDUNDANT,
}


@dataclass(frozen=True, slots=True)
class Meaning:
    """What the payload types of a group mean."""

    encodings: Mapping[int, Encoding]
    main: int
    """payload type of the audio of most packets"""
    clock_basis: str
    media: str
    step_ticks: int
    """timestamp step of most packets, 0 where none can be told"""

    @property
    def content_of(self) -> NDArray[np.uint8]:
        """Content by payload type. Shape (128,)."""
        table = np.zeros(128, np.uint8)
        for number, encoding in self.encodings.items():
            table[number] = CONTENT_OF.get(encoding.name, Content.AUDIO)
        return table


def meaning_of(
    rows: RtpRows,
    span: slice,
    flow: int,
    buffers: Sequence[Octets],
    given: Mapping[int, Encoding],
    offered: Offered | None,
    copied: Sequence[int] = (),
) -> Meaning:
    """What the payload types of the rows ``span`` mean, and those that only copies within them have."""
    types = rows.payload_type[span]
    counts = np.bincount(types, minlength=128)
    encodings: dict[int, Encoding] = {}
    basis: dict[int, str] = {}
    for number in sorted({*np.flatnonzero(counts).tolist(), *copied}):
        first = span.start + int(np.argmax(types == number)) if offered else 0
        announced = offered(flow, number, int(rows.time_ns[first])) if offered else None
        if number in given:
            encodings[number], basis[number] = given[number], "given"
        elif number in STATIC and (announced is None or announced == STATIC[number]):
            encodings[number], basis[number] = STATIC[number], "static"
        elif announced is not None and (announced.clock_rate_hz or announced.name in CONTENT_OF):
            encodings[number], basis[number] = announced, "offer"
        elif number == OLD_COMFORT_NOISE:
            encodings[number], basis[number] = STATIC[13], "static"
        elif _carries_events(rows, span, number, buffers):
            encodings[number], basis[number] = Encoding("telephone-event", 0, 0), "inferred"
        else:
            encodings[number], basis[number] = UNKNOWN, "inferred"
    audio = [number for number in encodings if encodings[number].name not in CONTENT_OF] or list(encodings)
    main = max(audio, key=lambda number: (counts[number], -number))
    step = _usual_step(rows, span)
    media = encodings[main].media
    if encodings[main].name == "unknown" and _frames_over_several_packets(rows, span):
        media = "video"
    for number, encoding in encodings.items():
        # A source may change to another clock in mid-call; a few packets tell none.
        unknown = encoding.name == "unknown" and counts[number] >= ENOUGH_PACKETS
        if encoding.clock_rate_hz == 0 and (unknown or number == main):
            mine = span.start + np.flatnonzero(types == number)
            rate = VIDEO_CLOCK_HZ if media == "video" else infer_clock_rate(rows.time_ns[mine], rows.timestamp[mine])
            sampling = 0 if encoding.name == "unknown" else rate
            encodings[number] = replace(encoding, clock_rate_hz=rate, sampling_rate_hz=sampling, media=media)
    for number, encoding in encodings.items():
        if encoding.clock_rate_hz == 0:
            encodings[number] = replace(encoding, clock_rate_hz=encodings[main].clock_rate_hz)
    known = encodings[main].clock_rate_hz > 0
    return Meaning(encodings, main, basis[main] if known else "", media, step)


def _usual_step(rows: RtpRows, span: slice) -> int:
    """Timestamp step between packets that follow each other in sequence, of most of the first few thousand."""
    head = slice(span.start, min(span.stop, span.start + 4096))
    following = np.diff(rows.sequence[head]) == 1
    steps = np.diff(rows.timestamp[head])[following]
    steps = steps[(steps > 0) & (steps < 1 << 16)]
    return int(np.bincount(steps).argmax()) if len(steps) else 0


def _carries_events(rows: RtpRows, span: slice, number: int, buffers: Sequence[Octets]) -> bool:
    """Whether a dynamic type looks like telephone-event: four octets, a known event, a timestamp that stands still."""
    mine = span.start + np.flatnonzero(rows.payload_type[span] == number)
    if number < 96 or not len(mine) or (rows.length[mine] != 4).any() or (rows.captured[mine] < 1).any():
        return False
    codes = np.array([buffers[rows.buffer[row]][rows.start[row]] for row in mine[:256]])
    return bool((codes <= HIGHEST_TELEPHONE_EVENT).all())


def _frames_over_several_packets(rows: RtpRows, span: slice) -> bool:
    """Whether a tenth or more of the packets go on with the frame of the packet before them, and are as large as video.

    No audio payload format splits a frame; redundant packets and events repeat a timestamp but are small.
    """
    following = np.diff(rows.sequence[span]) == 1
    same = (np.diff(rows.timestamp[span]) == 0) & following
    large = np.median(rows.length[span]) > LARGEST_AUDIO_FRAME_OCTETS
    return bool(same.sum() * 10 >= max(following.sum(), 1) and large)
