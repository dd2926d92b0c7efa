"""Codecs: payload octets in, 16-bit samples out.

``CODECS`` maps the IANA media subtype of an encoding to what the rest has to know about it. The decoder itself is
imported when it is first asked for, so that reading the table costs nothing.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from importlib import import_module
from importlib.util import find_spec
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


EXTRAS = {"codecs": "av"}
"""module that each extra of the package brings"""

G711 = "rtpaudit.codecs.g711"
LINEAR = "rtpaudit.codecs.l16"
OPTIONAL = "rtpaudit.codecs.optional"


def _optional(name: str, octets_per_block: int, samples_per_block: int, rate_hz: int = 8000) -> Codec:
    return Codec(f"{OPTIONAL}:{name}", rate_hz, rate_hz, octets_per_block, samples_per_block, extra="codecs")


CODECS: dict[str, Codec] = {
    "PCMU": Codec(f"{G711}:decode_pcmu_packets", 8000, 8000, table=f"{G711}:PCMU_SAMPLES"),
    "PCMA": Codec(f"{G711}:decode_pcma_packets", 8000, 8000, table=f"{G711}:PCMA_SAMPLES"),
    # The RTP clock stays at 8 kHz though it samples at 16 kHz (RFC 3551, 4.5.2).
    "G722": Codec("rtpaudit.codecs.g722:decode_g722_packets", 8000, 16000, 1, 2),
    "L16": Codec(f"{LINEAR}:decode_l16_packets", 44100, 44100, 2, 1, any_rate=True),
    "L8": Codec(f"{LINEAR}:decode_l8_packets", 8000, 8000, any_rate=True, table=f"{LINEAR}:L8_SAMPLES"),
    "G726-16": _optional("g726_16", 1, 4),
    "G726-24": _optional("g726_24", 3, 8),
    "G726-32": _optional("g726_32", 1, 2),
    "G726-40": _optional("g726_40", 5, 8),
    "AAL2-G726-16": _optional("aal2_g726_16", 1, 4),
    "AAL2-G726-24": _optional("aal2_g726_24", 3, 8),
    "AAL2-G726-32": _optional("aal2_g726_32", 1, 2),
    "AAL2-G726-40": _optional("aal2_g726_40", 5, 8),
    # Frames of 24, 20 or 4 octets for 240 samples (RFC 3551, 4.5.3).
    "G723": _optional("g723", 0, 0),
    "G729": _optional("g729", 10, 80),
    "GSM": _optional("gsm", 33, 160),
    # 38 octets for 160 samples or 50 for 240 (RFC 3951).
    "iLBC": _optional("ilbc", 0, 0),
    # RFC 7587: the clock counts 48,000 a second whatever the coder does.
    "opus": _optional("opus", 0, 0, 48_000),
}
"""Keys are IANA media subtypes; RFC 3551 gives clock and sampling rate where no other source stands beside the row."""


def codec_of(encoding: str) -> Codec:
    """The row of an encoding that can be decoded here, in any letter case.

    Raises
    ------
    MissingCodec
        Names the encodings that are known, or the extra that brings the decoder of this one.
    """
    codec = CODECS.get(encoding) or _BY_LOWER_CASE.get(encoding.lower())
    if codec is None:
        raise MissingCodec(f"no decoder for {encoding}; decoders exist for {', '.join(CODECS)}")
    if codec.extra and not _is_installed(EXTRAS[codec.extra]):
        raise MissingCodec(
            f"the decoder for {encoding} is not installed; pip install 'rtpaudit[{codec.extra}]' brings it"
        )
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
def _is_installed(module: str) -> bool:
    return find_spec(module) is not None


@cache
def _load(path: str) -> Any:
    module, name = path.split(":")
    return getattr(import_module(module), name)


_BY_LOWER_CASE = {name.lower(): codec for name, codec in CODECS.items()}
