"""The signalling room: packets come in, what the endpoints said of their calls goes out.

``SignallingCollector`` takes the rows of kind TEXT and TCP of one recording and returns its ``Signalling``: messages in
time order, calls with the media that was agreed at any time, media terms of gateways, quality reports, and damage.
"""

from rtpaudit.signalling.collector import Signalling, SignallingCollector

__all__ = ["Signalling", "SignallingCollector"]
