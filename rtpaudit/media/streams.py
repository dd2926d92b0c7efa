"""A stream: one SSRC one way between two address-and-port pairs, its packets as columns."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from rtpaudit.signalling.payload_types import Encoding


class Content(IntEnum):
    """What a packet of an audio stream carries."""

    AUDIO = 0
    EVENT = 1
    """telephone-event (RFC 4733)"""
    COMFORT_NOISE = 2
    """RFC 3389, payload type 13, and 19 of old gear"""
    REDUNDANT = 3
    """RFC 2198: the primary block inside is audio"""


@dataclass(slots=True)
class StreamPackets:
    """Columns of shape (n,) in order of arrival."""

    time_ns: NDArray[np.int64]
    frame: NDArray[np.int64]
    """frame number within its file, counted from 1"""
    buffer: NDArray[np.uint16]
    """which of the recording's octet buffers ``start`` points into"""
    start: NDArray[np.int64]
    """first octet of the RTP payload"""
    length: NDArray[np.int32]
    """octets of payload on the wire, without header, extension and padding"""
    captured: NDArray[np.int32]
    """of these, in the capture"""
    sequence: NDArray[np.uint16]
    timestamp: NDArray[np.uint32]
    payload_type: NDArray[np.uint8]
    marker: NDArray[np.bool_]
    dscp: NDArray[np.uint8]
    ttl: NDArray[np.uint8]
    ip_id: NDArray[np.uint16]
    vlan: NDArray[np.uint16]
    interface: NDArray[np.uint16]
    extended: NDArray[np.int64]
    """sequence number that goes on over wraps; each segment numbers on its own"""
    segment: NDArray[np.int32]
    """0, and one more for every restart or jump of the source"""
    duplicate: NDArray[np.bool_]
    """a number that had come before"""
    media_ticks: NDArray[np.int64]
    """RTP timestamp that goes on over wraps, 0 at the first packet of the stream"""
    content: NDArray[np.uint8]
    """a ``Content``"""

    def __len__(self) -> int:
        return len(self.time_ns)


@dataclass(slots=True)
class Stream:
    """One stream with what is known of its encoding."""

    recording: int
    capture: str
    flow: int
    source: str
    source_port: int
    destination: str
    destination_port: int
    ssrc: int
    packets: StreamPackets
    payload_type: int
    encoding: str
    clock_rate_hz: int
    sampling_rate_hz: int
    packet_time_ms: float
    clock_basis: str
    media: str = "audio"
    """``audio``, ``video`` or ``unknown``"""
    encrypted: bool = False
    match_basis: str = ""
    encodings: Mapping[int, Encoding] = field(default_factory=dict)
    """encoding of every payload type that occurs"""
    recovered: StreamPackets | None = None
    """packets that are missing and whose copies came within others (RFC 2198), under their own numbers and times"""
    told_again: StreamPackets | None = None
    """all copies of telephone events, under the numbers of the packets that brought them"""
    id: str = ""
