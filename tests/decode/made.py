"""Frames by hand into the decode room, and its packets as plain rows."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rtpaudit.capture.frames import Frames, Interface
from rtpaudit.decode import Decoder, Flows, Packets
from tests.craft import spaced


@dataclass(frozen=True)
class Row:
    """One packet, with its flow written out."""

    frame: int
    source: str
    source_port: int
    destination: str
    destination_port: int
    protocol: int
    kind: int
    octets: bytes
    length: int
    dscp: int
    ttl: int
    ip_id: int
    vlan: int


def frames_of(
    frames: Sequence[bytes],
    link_type: int = 1,
    *,
    originals: Sequence[int] | None = None,
    times_ns: Sequence[int] | None = None,
    first_number: int = 1,
) -> Frames:
    """A batch whose octets are the frames one after another, on one interface."""
    captured = np.array([len(frame) for frame in frames], np.int32)
    return Frames(
        octets=np.frombuffer(b"".join(frames), np.uint8),
        start=np.cumsum(captured, dtype=np.int64) - captured,
        captured=captured,
        original=captured if originals is None else np.array(originals, np.int32),
        time_ns=np.array(spaced(len(frames)) if times_ns is None else times_ns, np.int64),
        interface=np.zeros(len(frames), np.uint16),
        interfaces=(Interface(link_type),),
        first_number=first_number,
    )


def rows_of(batches: Sequence[Packets], flows: Flows) -> list[Row]:
    """Plain rows of batches of packets."""
    return [
        Row(
            frame=int(packets.frame[row]),
            source=flows.source_text(flow),
            source_port=int(flows.source_port[flow]),
            destination=flows.destination_text(flow),
            destination_port=int(flows.destination_port[flow]),
            protocol=int(flows.protocol[flow]),
            kind=int(packets.kind[row]),
            octets=packets.octets[packets.start[row] : packets.start[row] + packets.captured[row]].tobytes(),
            length=int(packets.length[row]),
            dscp=int(packets.dscp[row]),
            ttl=int(packets.ttl[row]),
            ip_id=int(packets.ip_id[row]),
            vlan=int(packets.vlan[row]),
        )
        for packets in batches
        for row, flow in enumerate(packets.flow.tolist())
    ]


def decoded(*frames: bytes, link_type: int = 1, originals: Sequence[int] | None = None) -> tuple[list[Row], Decoder]:
    """Rows of a few frames, and the decoder that made them."""
    decoder = Decoder()
    batches = decoder.decode(frames_of(frames, link_type, originals=originals), "made.pcap")
    batches += decoder.finish()
    return rows_of(batches, decoder.flows), decoder
