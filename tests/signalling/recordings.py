"""The way from the octets of a capture to its signalling, as the walk goes it."""

from pathlib import Path

from rtpaudit.capture import open_recordings
from rtpaudit.decode import Decoder
from rtpaudit.signalling import Signalling, SignallingCollector

FIXTURES = Path(__file__).parents[2] / "fixtures"


def signalling_of(path: Path) -> Signalling:
    """Signalling of the only recording of a capture."""
    (recording,) = open_recordings([path])
    decoder, collector = Decoder(), SignallingCollector()
    for file in recording.files:
        for frames in file.batches(262_144):
            for packets in decoder.decode(frames, file.name):
                collector.add(packets, decoder.flows, file.name)
    for packets in decoder.finish():
        collector.add(packets, decoder.flows, path.name)
    return collector.finish()
