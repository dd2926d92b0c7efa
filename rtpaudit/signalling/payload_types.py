"""What a payload type means: the static table of RFC 3551, what an offer says of it, and the user's own word."""

import re
from dataclasses import dataclass
from functools import lru_cache

from rtpaudit.errors import UnusableArguments


@dataclass(frozen=True, slots=True)
class Encoding:
    """How the payload of one payload type is coded."""

    name: str
    """IANA media subtype in its registered spelling (``PCMU``, ``opus``), else as it was announced"""
    clock_rate_hz: int
    """rate of the RTP timestamp"""
    sampling_rate_hz: int
    """rate of the decoded audio; 0 where the payload alone tells, and for video"""
    channels: int = 1
    media: str = "audio"
    """``audio`` or ``video``"""


_KNOWN = {
    # name: (clock rate where the format fixes one, else 0; sampling rate where it is not the clock rate, -1 where the
    # payload type does not tell; channels where none are announced; media)
    "PCMU": (0, 0, 1, "audio"),
    "PCMA": (0, 0, 1, "audio"),
    "GSM": (8000, 0, 1, "audio"),
    "GSM-EFR": (8000, 0, 1, "audio"),
    "GSM-HR-08": (8000, 0, 1, "audio"),
    "G723": (8000, 0, 1, "audio"),
    "DVI4": (0, 0, 1, "audio"),
    "VDVI": (0, 0, 1, "audio"),
    "LPC": (8000, 0, 1, "audio"),
    # The RTP clock of G722 is 8 kHz though it samples at 16 kHz (RFC 3551, 4.5.2).
    "G722": (8000, 16000, 1, "audio"),
    "G7221": (0, 0, 1, "audio"),
    "G719": (48000, 0, 1, "audio"),
    "G728": (8000, 0, 1, "audio"),
    "G729": (8000, 0, 1, "audio"),
    "G729D": (8000, 0, 1, "audio"),
    "G729E": (8000, 0, 1, "audio"),
    "G7291": (16000, 0, 1, "audio"),
    "G726-16": (8000, 0, 1, "audio"),
    "G726-24": (8000, 0, 1, "audio"),
    "G726-32": (8000, 0, 1, "audio"),
    "G726-40": (8000, 0, 1, "audio"),
    "AAL2-G726-16": (8000, 0, 1, "audio"),
    "AAL2-G726-24": (8000, 0, 1, "audio"),
    "AAL2-G726-32": (8000, 0, 1, "audio"),
    "AAL2-G726-40": (8000, 0, 1, "audio"),
    "L8": (0, 0, 1, "audio"),
    "L16": (0, 0, 1, "audio"),
    "L20": (0, 0, 1, "audio"),
    "L24": (0, 0, 1, "audio"),
    "QCELP": (8000, 0, 1, "audio"),
    "EVRC": (8000, 0, 1, "audio"),
    "EVRC0": (8000, 0, 1, "audio"),
    "EVRCB": (8000, 0, 1, "audio"),
    "SMV": (8000, 0, 1, "audio"),
    "iLBC": (8000, 0, 1, "audio"),
    "iSAC": (0, 0, 1, "audio"),
    "SILK": (0, 0, 1, "audio"),
    "speex": (0, 0, 1, "audio"),
    "opus": (48000, 0, 2, "audio"),
    "AMR": (8000, 0, 1, "audio"),
    "AMR-WB": (16000, 0, 1, "audio"),
    "EVS": (16000, 0, 1, "audio"),
    "MPA": (90000, -1, 1, "audio"),
    "mpeg4-generic": (0, 0, 1, "audio"),
    "MP4A-LATM": (0, 0, 1, "audio"),
    "CN": (0, 0, 1, "audio"),
    "telephone-event": (0, 0, 1, "audio"),
    "tone": (0, 0, 1, "audio"),
    "red": (0, 0, 1, "audio"),
    "CLEARMODE": (8000, 0, 1, "audio"),
    "CelB": (90000, -1, 1, "video"),
    "JPEG": (90000, -1, 1, "video"),
    "nv": (90000, -1, 1, "video"),
    "H261": (90000, -1, 1, "video"),
    "H263": (90000, -1, 1, "video"),
    "H263-1998": (90000, -1, 1, "video"),
    "H263-2000": (90000, -1, 1, "video"),
    "H264": (90000, -1, 1, "video"),
    "H265": (90000, -1, 1, "video"),
    "MPV": (90000, -1, 1, "video"),
    "MP2T": (90000, -1, 1, "video"),
    "VP8": (90000, -1, 1, "video"),
    "VP9": (90000, -1, 1, "video"),
    "AV1": (90000, -1, 1, "video"),
}
REGISTERED = frozenset(_KNOWN)
"""names that are the same wherever they are met; any other may be one of somebody's own making"""
_BY_FOLDED_NAME = {name.casefold(): name for name in _KNOWN}

# RFC 3551 section 5.1: an encoding name is a token of SDP.
_GIVEN = re.compile(
    r"\s*(\d{1,3})\s*=\s*([A-Za-z0-9!#$%&'*+.^_`{|}~-]{1,64})(?:/(\d{1,6})(?:/(\d{1,3}))?)?\s*", re.ASCII
)


@lru_cache(maxsize=4096)
def encoding(name: str, clock_rate_hz: int = 0, channels: int = 0, media: str = "audio") -> Encoding:
    """An encoding by name and what was announced with it (``a=rtpmap``, RFC 4566 section 6).

    The case of a known name is put right. Where the payload format fixes the clock rate it wins over the announced
    one: gear that announces ``G722/16000`` still counts at 8 kHz (RFC 3551, 4.5.2). Telephone events, comfort noise
    and redundancy follow the clock of the audio beside them.
    """
    known = _BY_FOLDED_NAME.get(name.casefold())
    if known is None:
        return Encoding(name, clock_rate_hz, clock_rate_hz if media == "audio" else 0, channels or 1, media)
    fixed, sampling, usual_channels, usual_media = _KNOWN[known]
    clock = fixed or clock_rate_hz
    sampling_rate = {0: clock, -1: 0}.get(sampling, sampling)
    return Encoding(known, clock, sampling_rate, channels or usual_channels, usual_media)


STATIC = {
    0: encoding("PCMU", 8000),
    3: encoding("GSM", 8000),
    4: encoding("G723", 8000),
    5: encoding("DVI4", 8000),
    6: encoding("DVI4", 16000),
    7: encoding("LPC", 8000),
    8: encoding("PCMA", 8000),
    9: encoding("G722", 8000),
    10: encoding("L16", 44100, 2),
    11: encoding("L16", 44100),
    12: encoding("QCELP", 8000),
    13: encoding("CN", 8000),
    14: encoding("MPA", 90000),
    15: encoding("G728", 8000),
    16: encoding("DVI4", 11025),
    17: encoding("DVI4", 22050),
    18: encoding("G729", 8000),
    25: encoding("CelB", 90000),
    26: encoding("JPEG", 90000),
    28: encoding("nv", 90000),
    31: encoding("H261", 90000),
    32: encoding("MPV", 90000),
    33: encoding("MP2T", 90000),
    34: encoding("H263", 90000),
}
"""RFC 3551 tables 4 and 5: what a payload type means where nothing else was said."""

OLD_COMFORT_NOISE = 19
"""Reserved by RFC 3551 because drafts used it for comfort noise, and old gear still does."""


def parse_given(text: str) -> tuple[int, Encoding]:
    """The user's word on one payload type, ``NUMBER=ENCODING/CLOCK[/CHANNELS]``.

    Raises
    ------
    UnusableArguments
        Where the text is none such, the number cannot be an RTP payload type, or the clock contradicts the encoding.
    """
    found = _GIVEN.fullmatch(text)
    if found is None:
        raise UnusableArguments(f"payload type {text!r} is not of the form 96=G722/8000")
    number, clock_rate_hz, channels = int(found[1]), int(found[3] or 0), int(found[4] or 0)
    if number > 127 or 72 <= number <= 76:
        raise UnusableArguments(f"payload type {text!r}: RTP audio uses 0 to 71 and 77 to 127 (RFC 3551 section 6)")
    made = encoding(found[2], clock_rate_hz, channels)
    if made.clock_rate_hz == 0:
        raise UnusableArguments(f"payload type {text!r} lacks a clock rate, as in {number}={made.name}/8000")
    if found[3] is not None and clock_rate_hz != made.clock_rate_hz:
        raise UnusableArguments(f"payload type {text!r}: the RTP clock of {made.name} is {made.clock_rate_hz} Hz")
    if found[4] is not None and channels == 0:
        raise UnusableArguments(f"payload type {text!r} has no channel")
    return number, made
