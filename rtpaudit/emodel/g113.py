"""Ie and Bpl of each encoding (ITU-T G.113, Appendix I), each row with its source.

Only narrowband values stand here. Those of the wideband scale (Appendix IV) must never meet them in one rating, and
where G.113 has no row nothing is made up: ``impairment`` says None, and ``reason_for_no_rating`` says why.
"""

from collections.abc import Mapping
from dataclasses import dataclass

from rtpaudit.planning import CodecValues

_I1 = "ITU-T G.113 Appendix I Table I.1"
_I4 = "ITU-T G.113 (2024) Appendix I Table I.4"
_READ = "read at second hand"
_MEMORY = "from memory"
_BOUND = "from memory, agrees with a printed delay bound"

_NARROWBAND_HZ = 8000


@dataclass(frozen=True, slots=True)
class Impairment:
    """What a codec costs: Ie without loss, Bpl against loss."""

    encoding: str
    Ie: float
    Bpl: float | None
    """None where G.113 has none"""
    condition: str
    source: str
    how_known: str
    kbit_s: float | None = None
    """None where the encoding has one bit rate"""

    @property
    def note(self) -> str:
        """What to say of a rating under loss, "" where Bpl is known."""
        if self.Bpl is not None:
            return ""
        return f"G.113 gives no Bpl for {self.encoding}, the default of G.107 (4.3, no concealment) stands in"


# Where an encoding has several rows, the first holds when the bit rate is not known.
ROWS = (
    Impairment("PCMU", 0.0, 25.1, "concealed as by G.711 Appendix I, 10 ms packets", _I4, _READ),
    Impairment("PCMA", 0.0, 25.1, "concealed as by G.711 Appendix I, 10 ms packets", _I4, _READ),
    # G.729 without silence suppression has Ie 10 (Table I.1) but no Bpl; the one row that has both is taken for all.
    Impairment("G729", 11.0, 19.0, "G.729A with VAD, 20 ms packets", _I4, _READ),
    Impairment("G723", 15.0, 16.1, "6.3 kbit/s with VAD, 30 ms packets", _I4, _READ, 6.3),
    Impairment("G723", 19.0, None, "5.3 kbit/s, no loss", _I1, _READ, 5.3),
    Impairment("GSM-EFR", 5.0, 10.0, "20 ms packets", _I4, _READ),
    Impairment("GSM", 20.0, None, "full rate, no loss", _I1, _BOUND),
    Impairment("GSM-HR-08", 23.0, None, "half rate, no loss", _I1, _BOUND),
    Impairment("G726-40", 2.0, None, "no loss", _I1, _READ),
    Impairment("G726-32", 7.0, None, "no loss", _I1, _READ),
    Impairment("G726-24", 25.0, None, "no loss", _I1, _READ),
    Impairment("G726-16", 50.0, None, "no loss", _I1, _READ),
    Impairment("G728", 7.0, None, "16 kbit/s, no loss", _I1, _READ),
    Impairment("EVRC", 6.0, None, "IS-127, no loss", _I1, _MEMORY),
)

NOT_CONCEALED = (
    Impairment("PCMU", 0.0, 4.3, "not concealed, 10 ms packets", _I4, _READ),
    Impairment("PCMA", 0.0, 4.3, "not concealed, 10 ms packets", _I4, _READ),
)
"""Rows that hold where the receiver fills losses with silence; the other codecs conceal by themselves."""

# Other names of the same octets: ITU-T G.726 packed for AAL2 (RFC 3551, 4.5.4), and G.721, which became G726-32.
_SAME = {"G721": "G726-32"} | {f"AAL2-G726-{rate}": f"G726-{rate}" for rate in (16, 24, 32, 40)}

_WIDEBAND = frozenset({"G722", "G7221", "G7222", "AMR-WB", "G7291", "EVRCWB", "PCMU-WB", "PCMA-WB"})


def impairment(
    encoding: str,
    *,
    conceals_loss: bool = True,
    kbit_s: float | None = None,
    sampling_rate_hz: int = _NARROWBAND_HZ,
    own: Mapping[str, CodecValues] | None = None,
) -> Impairment | None:
    """Ie and Bpl that hold for an encoding.

    Parameters
    ----------
    encoding : str
        Media subtype, in any case.
    conceals_loss : bool
        Whether the receiver conceals loss of G.711 (Bpl 25.1) or plays silence (4.3).
    kbit_s : float, optional
        Bit rate of encodings that have several. [kbit/s]
    sampling_rate_hz : int
        Of the audio: over 8000 it is wideband, which narrowband values do not fit. [Hz]
    own : mapping, optional
        Values of the profile by media subtype; they win over the table.

    Returns
    -------
    Impairment or None
        None where G.113 has no narrowband row and the profile says nothing.

    References
    ----------
    ITU-T G.113, Appendix I, Tables I.1 and I.4.
    """
    name = encoding.upper()
    for key, values in (own or {}).items():
        if key.upper() == name:
            return Impairment(encoding, values.Ie, values.Bpl, "as the profile says", "profile", "given")
    if sampling_rate_hz > _NARROWBAND_HZ:
        return None
    name = _SAME.get(name, name)
    table = ROWS if conceals_loss else NOT_CONCEALED + ROWS
    rows = [row for row in table if row.encoding == name]
    exact = [row for row in rows if row.kbit_s == kbit_s]
    return next(iter(exact + rows), None)


def reason_for_no_rating(encoding: str, sampling_rate_hz: int = _NARROWBAND_HZ) -> str:
    """The sentence for ``rating_note`` where ``impairment`` knows nothing of an encoding."""
    if not encoding or encoding.lower() == "unknown":
        return "encoding not known, so no Ie and Bpl"
    if encoding.upper() in _WIDEBAND or sampling_rate_hz > _NARROWBAND_HZ:
        return f"{encoding} is not narrowband, G.113 Appendix I has no values for it"
    return f"G.113 Appendix I has no values for {encoding}"
