"""Codecs: payload octets in, 16-bit samples out.

``CODECS`` maps the IANA media subtype of an encoding to what the rest has to know about it. The decoder itself is
imported when it is first asked for, so that reading the table costs nothing.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from importlib import import_module
from typing import Any, cast

import numpy as np
from numpy.typing import NDArray

from rtpaudit.errors import MissingCodec

Octets = NDArray[np.uint8]
Samples = NDArray[np.int16]
Offsets = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Codec:
    """What is known of an encoding before any of its payloads is decoded."""

    decoder: str
    """``module:function``, called with the octets of many packets and the offsets at which the packets begin"""
    clock_rate_hz: int
    sampling_rate_hz: int
    octets_per_block: int = 1
    """octets that decode to ``samples_per_block`` samples; 0 where the payload itself tells"""
    samples_per_block: int = 1
    any_rate: bool = False
    """sampled at whatever clock rate was agreed; ``clock_rate_hz`` is then only the usual one"""
    look_ahead_ms: float = 0.0
    """part of a frame that the coder must hear in advance [ms]"""
    table: str = ""
    """``module:attribute`` of the 256 sample values of a code that has one octet a sample"""
    extra: str = ""
    """extra of the package that brings the decoder, "" where it is built in"""

    def sampling_rate(self, clock_rate_hz: int) -> int:
        """Sampling rate of a stream of this encoding whose RTP clock runs at ``clock_rate_hz``. [Hz]"""
        return clock_rate_hz if self.any_rate else self.sampling_rate_hz

    def samples_in(self, octets: int) -> int:
        """Samples that a payload of so many octets stands for, 0 where only its content tells."""
        return octets // self.octets_per_block * self.samples_per_block if self.octets_per_block else 0


G711 = "rtpaudit.codecs.g711"

CODECS: dict[str, Codec] = {
    "PCMU": Codec(f"{G711}:decode_pcmu_packets", 8000, 8000, table=f"{G711}:PCMU_SAMPLES"),
    "PCMA": Codec(f"{G711}:decode_pcma_packets", 8000, 8000, table=f"{G711}:PCMA_SAMPLES"),
}
"""Keys are IANA media subtypes; RFC 3551 gives clock and sampling rate where no other source stands beside the row."""


def codec_of(encoding: str) -> Codec:
    """The row of an encoding, whatever its letter case. Raises MissingCodec with the encodings that are known."""
    codec = CODECS.get(encoding) or _BY_LOWER_CASE.get(encoding.lower())
    if codec is None:
        raise MissingCodec(f"no decoder for {encoding}; decoders exist for {', '.join(CODECS)}")
    return codec


def decode(encoding: str, octets: Octets, offsets: Offsets) -> tuple[Samples, Offsets]:
    """Samples of many packets of one stream, in the order of its media time.

    Parameters
    ----------
    encoding : str
        IANA media subtype, in any letter case.
    octets : uint8 array, shape (octets,)
        Payloads one after the other.
    offsets : int64 array, shape (packets + 1,)
        Packet ``i`` is ``octets[offsets[i]:offsets[i + 1]]``.

    Returns
    -------
    samples : int16 array, shape (samples,)
    offsets : int64 array, shape (packets + 1,)
        The same for the samples.

    Raises
    ------
    MissingCodec
        If no decoder of this encoding is known or installed.
    """
    function = cast(Callable[[Octets, Offsets], tuple[Samples, Offsets]], _load(codec_of(encoding).decoder))
    return function(octets, offsets)


def sample_table(encoding: str) -> Samples | None:
    """The 256 samples of an encoding of one octet a sample, None for any other. Raises MissingCodec as ``decode``."""
    table = codec_of(encoding).table
    return cast(Samples, _load(table)) if table else None


@cache
def _load(path: str) -> Any:
    module, name = path.split(":")
    return getattr(import_module(module), name)


_BY_LOWER_CASE = {name.lower(): codec for name, codec in CODECS.items()}
