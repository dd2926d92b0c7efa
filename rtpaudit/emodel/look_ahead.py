"""How much future sound each encoder waits for before it can send: its look-ahead."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class LookAhead:
    """One row: an encoding and its look-ahead. [ms]"""

    encoding: str
    milliseconds: float
    source: str


ROWS = (
    LookAhead("PCMU", 0.0, "ITU-T G.711, sample by sample"),
    LookAhead("PCMA", 0.0, "ITU-T G.711, sample by sample"),
    LookAhead("L16", 0.0, "RFC 3551, 4.5.11, sample by sample"),
    LookAhead("G723", 7.5, "RFC 3551, 4.5.3"),
    LookAhead("G729", 5.0, "ITU-T G.729, from memory"),
    LookAhead("G729D", 5.0, "ITU-T G.729 Annex D, from memory"),
    LookAhead("G729E", 5.0, "ITU-T G.729 Annex E, from memory"),
    LookAhead("G722", 1.5, "ITU-T G.114, its filter banks, from memory"),
    LookAhead("AMR", 5.0, "ITU-T G.114, modes up to 10.2 kbit/s, from memory"),
    LookAhead("AMR-WB", 5.0, "ITU-T G.722.2, from memory"),
    LookAhead("opus", 6.5, "RFC 6716, default mode, from memory"),
    LookAhead("speex", 10.0, "narrowband, from memory"),
)

_BY_NAME = {row.encoding.upper(): row for row in ROWS}


def look_ahead_ms(encoding: str) -> float:
    """Look-ahead of an encoding.

    Parameters
    ----------
    encoding : str
        Media subtype, in any case.

    Returns
    -------
    float
        0 where none is known: then the delay is a lower bound. [ms]

    References
    ----------
    Each row names its own.
    """
    row = _BY_NAME.get(encoding.upper())
    return row.milliseconds if row else 0.0
