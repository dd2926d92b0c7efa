"""The signalling room: packets come in, what the endpoints said of their calls goes out.

``SignallingCollector`` takes the rows of kind TEXT and TCP of one recording and returns its ``Signalling``: messages in
time order, calls with the media that was agreed at any time, media terms of gateways, quality reports, and damage.

RFC 2543, 3262, 3311, 3325, 3326, 3339, 3420, 3515, 3891, 5626, 5806, 6455, 7044 and 7989 are cited from memory in this
room.
"""

from rtpaudit.signalling.collector import Signalling, SignallingCollector

__all__ = ["Signalling", "SignallingCollector"]
