"""Decoders that need the extra ``codecs``: PyAV, which carries the audio decoders of FFmpeg and works offline.

Speed is that of a call per packet. A packet that its decoder refuses gives no samples, so it stays silent on the
timeline; silence descriptors of G.729 (two octets, RFC 3551 4.5.6) are left out for the same reason.
"""

from collections.abc import Iterator
from dataclasses import dataclass, field
from importlib import import_module
from typing import Any, cast

import numpy as np
from numpy.typing import NDArray

Octets = NDArray[np.uint8]
Samples = NDArray[np.int16]
Offsets = NDArray[np.int64]

LONGEST_PACKET_S = 0.5
"""no packet of a call carries more; what a decoder makes beyond it is dropped"""


@dataclass(frozen=True, slots=True)
class ByPacket:
    """A decoder that is handed one packet after the other and remembers what came before."""

    decoder: str
    """name within FFmpeg"""
    rate_hz: int = 8000
    layout: str = "mono"
    options: dict[str, str] = field(default_factory=dict)
    frame_octets: int = 1
    """octets after a last whole frame are left out"""

    def __call__(self, octets: Octets, offsets: Offsets) -> tuple[Samples, Offsets]:
        """Samples of many packets, and where those of each begin. ``codec_of`` has made sure of PyAV."""
        av = import_module("av")
        context = self._context(av, int(offsets[1] - offsets[0]) if len(offsets) > 1 else 0)
        parts = [
            _decoded(av, context, payload)[: int(LONGEST_PACKET_S * self.rate_hz)]
            for payload in self._payloads(octets, offsets)
        ]
        ends = np.cumsum([0, *(len(part) for part in parts)], dtype=np.int64)
        return np.concatenate([np.empty(0, np.int16), *parts]), ends

    def _context(self, av: Any, first_length: int) -> Any:
        context = av.CodecContext.create(self.decoder, "r")
        context.sample_rate = self.rate_hz
        context.layout = self.layout
        context.options = dict(self.options)
        if self.decoder == "ilbc":
            # Its two frame lengths are told apart by bit rate: 50 octets every 30 ms or 38 every 20 ms (RFC 3951).
            context.bit_rate = 13_330 if first_length and first_length % 50 == 0 else 15_200
        return context

    def _payloads(self, octets: Octets, offsets: Offsets) -> Iterator[bytes]:
        for begin, end in zip(offsets[:-1].tolist(), offsets[1:].tolist(), strict=True):
            yield octets[begin : end - (end - begin) % self.frame_octets].tobytes()


def _decoded(av: Any, context: Any, payload: bytes) -> Samples:
    """Samples of one payload, channels mixed into one; none where the decoder refuses it."""
    if not payload:
        return np.empty(0, np.int16)
    try:
        frames = context.decode(av.Packet(payload))
    except av.error.FFmpegError:
        return np.empty(0, np.int16)
    return np.concatenate([np.empty(0, np.int16), *(_mono(frame) for frame in frames)])


def _mono(frame: Any) -> Samples:
    values = frame.to_ndarray()
    if not frame.format.is_planar:
        values = values.reshape(-1, len(frame.layout.channels)).T
    if len(values) == 1 and values.dtype == np.int16:
        return cast(Samples, values[0])
    if values.dtype.kind == "f":
        values = values * 32767.0
    return np.asarray(np.clip(np.rint(values.mean(axis=0)), -32768, 32767), np.int16)


def _g726(decoder: str, bits: int) -> ByPacket:
    return ByPacket(decoder, options={"bits_per_coded_sample": str(bits)})


# RFC 3551, 4.5.4: the first sample lies in the least significant bits; with the prefix AAL2 in the most significant.
g726_16, g726_24 = _g726("g726le", 2), _g726("g726le", 3)
g726_32, g726_40 = _g726("g726le", 4), _g726("g726le", 5)
aal2_g726_16, aal2_g726_24 = _g726("g726", 2), _g726("g726", 3)
aal2_g726_32, aal2_g726_40 = _g726("g726", 4), _g726("g726", 5)
g723 = ByPacket("g723_1")
g729 = ByPacket("g729", frame_octets=10)
gsm = ByPacket("gsm", frame_octets=33)
ilbc = ByPacket("ilbc")
opus = ByPacket("libopus", 48_000, "stereo")
