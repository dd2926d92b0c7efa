"""From grouped RTP rows to streams: recognised, named, numbered, split where a source came back after long silence."""

from collections.abc import Callable, Mapping, Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from rtpaudit.capture.frames import Octets
from rtpaudit.decode.packets import Flows
from rtpaudit.media.meaning import Meaning, Offered, meaning_of
from rtpaudit.media.numbering import Numbering, number
from rtpaudit.media.recognise import is_rtp, survey
from rtpaudit.media.redundancy import Copies, as_packets, of_lost, unpack
from rtpaudit.media.rtp import Groups, RtpCollector, merge_interfaces, selected
from rtpaudit.media.streams import Content, Stream, StreamPackets
from rtpaudit.signalling.calls import SipCall
from rtpaudit.signalling.payload_types import Encoding

DialogOf = Callable[[int, int], SipCall | None]
"""(flow, arrival in ns) to the dialog that media of that flow belonged to then, None where no party named its ends"""

SAMPLE_OCTETS = {"PCMU": 1.0, "PCMA": 1.0, "G722": 1.0, "L8": 1.0, "L16": 2.0, "G726-32": 0.5}
"""Octets for each tick of the RTP clock and channel, of encodings whose payload length tells the packet time."""

LONGEST_TAG_OCTETS = 20
"""RFC 3711: the authentication tag of 4, 10 or 16 octets, with a key identifier of up to 4."""


def find_streams(
    collector: RtpCollector,
    flows: Flows,
    buffers: Sequence[Octets],
    *,
    recording: int = 0,
    capture: str = "",
    given: Mapping[int, Encoding] | None = None,
    offered: Offered | None = None,
    dialog_of: DialogOf | None = None,
) -> list[Stream]:
    """The streams of one recording, by first packet.

    ``buffers`` are the octets that rows point into, ``capture`` the name of the recording. A restart under a new
    dialog is a new stream.
    """
    groups = collector.finish()
    merge_interfaces(groups)
    groups = selected(groups, is_rtp(survey(groups)))
    meanings = [
        meaning_of(groups.rows, slice(*bounds), int(flow), buffers, given or {}, offered)
        for bounds, flow in zip(_spans(groups), groups.flow, strict=True)
    ]
    groups, copies = unpack(groups, meanings, buffers)
    for group, span in enumerate(_spans(groups) if copies else ()):
        if group in copies:
            types = np.unique(copies[group].payload_type).tolist()
            flow = int(groups.flow[group])
            meanings[group] = meaning_of(groups.rows, slice(*span), flow, buffers, given or {}, offered, types)
    rates = np.array([one.encodings[one.main].clock_rate_hz for one in meanings], np.float64)
    numbering = number(groups, rates, np.array([one.step_ticks for one in meanings], np.int64))
    streams = []
    for group, span in enumerate(_spans(groups)):
        rows = slice(*span)
        if dialog_of is not None:
            _part_by_dialog(groups, numbering, rows, int(groups.flow[group]), dialog_of)
        for first, packets in _parts(groups, numbering, rows, meanings[group]):
            stream = _stream(packets, groups, group, meanings[group], flows, recording, capture)
            if group in copies:
                _add_copies(stream, copies[group], groups, numbering, rows, first, meanings[group])
            streams.append(stream)
    return sorted(streams, key=lambda one: (int(one.packets.time_ns[0]), int(one.packets.frame[0])))


def _spans(groups: Groups) -> list[tuple[int, int]]:
    edges = groups.bounds.tolist()
    return list(pairwise(edges))


def _part_by_dialog(groups: Groups, numbering: Numbering, span: slice, flow: int, dialog_of: DialogOf) -> None:
    """Begin a new stream of a group at each segment that began under another dialog than the ones before it."""
    segment = numbering.segment[span]
    if segment.max() <= 0:
        return
    first = np.unique(segment[segment >= 0], return_index=True)[1]
    began = groups.rows.time_ns[span][segment >= 0][first].tolist()
    later = np.zeros(len(began), np.int32)
    before: SipCall | None = None
    for k, time_ns in enumerate(began):
        now = dialog_of(flow, time_ns)
        later[k] = later[max(k - 1, 0)]
        if now is not None:
            # Legs of one call may share the media: a dialog is new where it began after the media did.
            later[k] += before is not None and now is not before and now.started_ns > began[k - 1]
            before = now
    numbering.stream[span] += later[np.maximum(segment, 0)]


def _add_copies(
    stream: Stream,
    copies: Copies,
    groups: Groups,
    numbering: Numbering,
    span: slice,
    first: int,
    meaning: Meaning,
) -> None:
    """What redundant packets hold of a stream besides: lost packets, and events."""
    content = meaning.content_of
    mine = copies.those(
        (numbering.stream[copies.row] == numbering.stream[first]) & (numbering.segment[copies.row] >= 0)
    )
    lost, number = of_lost(mine, numbering, span, meaning.step_ticks)
    if len(lost):
        stream.recovered = as_packets(lost, number, groups.rows, numbering, first, content)
    events = mine.those(content[mine.payload_type] == Content.EVENT)
    if len(events):
        carrier = numbering.extended[events.row]
        stream.told_again = as_packets(events, carrier, groups.rows, numbering, first, content)


def _parts(groups: Groups, numbering: Numbering, span: slice, meaning: Meaning) -> list[tuple[int, StreamPackets]]:
    """First row and packets of each stream of a group; strays that belong to no run of numbers are left out."""
    segment, part = numbering.segment[span], numbering.stream[span]
    content = meaning.content_of
    if part[-1] == 0 and segment.min() >= 0:
        return [(span.start, _packets(groups, numbering, span, content))]
    whole = []
    for one in range(int(part.max()) + 1):
        rows = span.start + np.flatnonzero((part == one) & (segment >= 0))
        if len(rows):
            whole.append((int(rows[0]), _packets(groups, numbering, rows, content)))
    return whole


def _packets(
    groups: Groups, numbering: Numbering, rows: slice | NDArray[np.int64], content: NDArray[np.uint8]
) -> StreamPackets:
    all_rows = groups.rows
    ticks = numbering.media_ticks[rows]
    segment = numbering.segment[rows]
    payload_type = all_rows.payload_type[rows]
    return StreamPackets(
        time_ns=all_rows.time_ns[rows],
        frame=all_rows.frame[rows],
        buffer=all_rows.buffer[rows],
        start=all_rows.start[rows],
        length=all_rows.length[rows],
        captured=all_rows.captured[rows],
        sequence=all_rows.sequence[rows],
        timestamp=all_rows.timestamp[rows],
        payload_type=payload_type,
        marker=all_rows.marker[rows],
        dscp=all_rows.dscp[rows],
        ttl=all_rows.ttl[rows],
        ip_id=all_rows.ip_id[rows],
        vlan=all_rows.vlan[rows],
        interface=all_rows.interface[rows],
        extended=numbering.extended[rows],
        segment=segment - segment[0] if segment[0] else segment,
        duplicate=numbering.duplicate[rows],
        media_ticks=ticks - ticks[0] if ticks[0] else ticks,
        content=content[payload_type],
    )


def _stream(
    packets: StreamPackets,
    groups: Groups,
    group: int,
    meaning: Meaning,
    flows: Flows,
    recording: int,
    capture: str,
) -> Stream:
    flow = int(groups.flow[group])
    main = meaning.encodings[meaning.main]
    return Stream(
        recording=recording,
        capture=capture,
        flow=flow,
        source=flows.source_text(flow),
        source_port=int(flows.source_port[flow]),
        destination=flows.destination_text(flow),
        destination_port=int(flows.destination_port[flow]),
        ssrc=int(groups.ssrc[group]),
        packets=packets,
        payload_type=meaning.main,
        encoding=main.name,
        clock_rate_hz=main.clock_rate_hz,
        sampling_rate_hz=main.sampling_rate_hz,
        packet_time_ms=_packet_time_ms(packets, meaning),
        clock_basis=meaning.clock_basis,
        media=meaning.media,
        encodings=dict(meaning.encodings),
    )


def _packet_time_ms(packets: StreamPackets, meaning: Meaning) -> float:
    """Media time of most audio packets, NaN where nothing tells.

    The timestamp step between packets that follow each other tells. Where the encoding has a fixed number of octets a
    sample and the payload says otherwise, the payload is right, unless it only bears an authentication tag on top.
    """
    main = meaning.encodings[meaning.main]
    if main.clock_rate_hz == 0:
        return float("nan")
    mine = (packets.payload_type == meaning.main) & (packets.content == Content.AUDIO)
    following = (np.diff(packets.extended) == 1) & mine[1:] & mine[:-1]
    steps = np.diff(packets.media_ticks)[following]
    ticks = float(_most_common(steps[(steps > 0) & (steps < 1 << 16)]))
    octets = SAMPLE_OCTETS.get(main.name)
    if octets is not None:
        filled = _most_common(packets.length[mine]) / (octets * main.channels)
        if not 0 <= filled - ticks <= LONGEST_TAG_OCTETS / octets:
            ticks = filled
    return 1000.0 * ticks / main.clock_rate_hz if ticks else float("nan")


def _most_common(values: NDArray[np.integer]) -> int:
    return int(np.bincount(values).argmax()) if len(values) else 0
