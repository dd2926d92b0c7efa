"""Ids of streams, calls and conversations: by order in the whole audit, so that a narrowed one has the same."""

from collections.abc import Sequence

from rtpaudit.media.calls import Call
from rtpaudit.media.join import conversations
from rtpaudit.media.streams import Stream


def name_all(streams: list[Stream], calls: list[Call]) -> None:
    """Put streams in order of their first packet and calls in order of their begin, and give each its id."""
    streams.sort(key=lambda stream: int(stream.packets.time_ns[0]))
    calls.sort(key=lambda call: call.started_ns)
    for k, stream in enumerate(streams, start=1):
        stream.id = f"s{k:02d}"
    for k, (call, conversation) in enumerate(zip(calls, conversations(calls), strict=True), start=1):
        call.id, call.conversation = f"c{k:02d}", f"v{conversation + 1:02d}"


def streams_of(calls: Sequence[Call], streams: Sequence[Stream]) -> list[Stream]:
    """Those of the streams that belong to the calls, in their order."""
    wanted = {id(stream) for call in calls for stream in call.streams}
    return [stream for stream in streams if id(stream) in wanted]
