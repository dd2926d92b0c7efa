"""Captures: paths come in, recordings of frames in columns go out, with a note of everything that could not be read.

The container is found by its first octets, after compression was peeled off. The octets of a file are mapped, never
copied.
"""

from rtpaudit.capture.files import CaptureFile
from rtpaudit.capture.frames import Damage, Frames, Interface, Octets
from rtpaudit.capture.recordings import Recording, open_recordings

__all__ = ["CaptureFile", "Damage", "Frames", "Interface", "Octets", "Recording", "open_recordings"]
