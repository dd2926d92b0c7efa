"""What limits a rating, in words for ``rating_note``."""

from rtpaudit.planning import PARAMETERS

# Measured parameters whose range a stream can leave; T and Tr follow from Ta.
_WATCHED = {"Ppl": "loss and discards", "Ta": "one-way delay", "BurstR": "burst ratio", "TELR": "talker echo loudness"}


def rating_note(*, further: str = "", **measured: float) -> str:
    """What a reader has to know about one rating, "" where nothing limits it.

    Parameters
    ----------
    further : str
        Another note, such as that of an ``Impairment`` that has no Bpl. It comes last.
    **measured : float
        Ppl [%], Ta [ms], BurstR and TELR [dB], as far as they were measured. NaN says nothing, and a BurstR below 1,
        which is rated as 1, neither.

    Returns
    -------
    str
        Each limit that is passed, joined by "; ".

    Raises
    ------
    ValueError
        If a name is none of those four.

    References
    ----------
    ITU-T G.107 (06/2015), Table 3, permitted ranges.
    """
    unknown = measured.keys() - _WATCHED.keys()
    if unknown:
        raise ValueError(f"no range to watch for {', '.join(sorted(unknown))}: known are {', '.join(_WATCHED)}")
    notes = [_passed(symbol, measured[symbol]) for symbol in _WATCHED if symbol in measured]
    return "; ".join(note for note in [*notes, further] if note)


def _passed(symbol: str, value: float) -> str:
    row = PARAMETERS[symbol]
    unit = f" {row.unit}" if row.unit else ""
    if value > row.high:
        return f"{_WATCHED[symbol]} ({symbol}) of {value:.4g}{unit} is over the {row.high:g}{unit} that G.107 covers"
    if value < row.low and symbol != "BurstR":
        return f"{_WATCHED[symbol]} ({symbol}) of {value:.4g}{unit} is under the {row.low:g}{unit} that G.107 covers"
    return ""
