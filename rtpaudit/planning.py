"""Planning values of the E-model: each G.107 parameter with its default, its permitted range and its meaning.

The table is ITU-T G.107 (06/2015), Table 3 (Table 2 in older editions); the ranges of sT and mT are from memory.
"""

from dataclasses import dataclass, field, fields
from typing import Any

G107 = "ITU-T G.107 (06/2015), Table 3"


@dataclass(frozen=True, slots=True)
class Parameter:
    """One row of the table: what may be set, and what stands when nothing is."""

    default: float
    low: float
    high: float
    unit: str
    """"" where it has none"""
    meaning: str
    source: str = G107


def _planned(default: float, low: float, high: float, unit: str, meaning: str, source: str = G107) -> Any:
    return field(default=default, metadata={"parameter": Parameter(default, low, high, unit, meaning, source)})


def _open(default: float, low: float, high: float, unit: str, meaning: str, source: str = G107) -> Any:
    return field(default=None, metadata={"parameter": Parameter(default, low, high, unit, meaning, source)})


@dataclass(frozen=True, slots=True)
class PlanningValues:
    """All parameters of the E-model under their G.107 names.

    Those that are None are measured, or follow from the encoding or from other values; where nothing tells them the
    default of G.107 stands. A number in their place holds for every stream, whatever was measured.
    """

    SLR: float = _planned(8.0, 0.0, 18.0, "dB", "send loudness rating")
    RLR: float = _planned(2.0, -5.0, 14.0, "dB", "receive loudness rating")
    STMR: float = _planned(15.0, 10.0, 20.0, "dB", "sidetone masking rating")
    LSTR: float | None = _open(18.0, 13.0, 23.0, "dB", "listener sidetone rating; STMR + Dr where it is not set")
    Ds: float = _planned(3.0, -3.0, 3.0, "", "D-value of the telephone, send side")
    Dr: float = _planned(3.0, -3.0, 3.0, "", "D-value of the telephone, receive side")
    TELR: float | None = _open(65.0, 5.0, 65.0, "dB", "talker echo loudness rating")
    WEPL: float = _planned(110.0, 5.0, 110.0, "dB", "weighted echo path loss")
    T: float | None = _open(0.0, 0.0, 500.0, "ms", "mean one-way delay of the echo path")
    Tr: float | None = _open(0.0, 0.0, 1000.0, "ms", "round-trip delay in a 4-wire loop")
    Ta: float | None = _open(0.0, 0.0, 500.0, "ms", "absolute delay in echo-free connections")
    sT: float = _planned(
        1.0, 0.4, 1.0, "", "delay sensitivity: 0.55 for low, 0.4 for very low", "ITU-T G.107 (06/2015), Table 1"
    )
    mT: float = _planned(
        100.0, 20.0, 150.0, "ms", "least delay noticed: 120 for low, 150 for very low", "ITU-T G.107 (06/2015), Table 1"
    )
    qdu: float = _planned(1.0, 1.0, 14.0, "", "quantisation distortion units")
    Ie: float | None = _open(0.0, 0.0, 40.0, "", "equipment impairment factor")
    Bpl: float | None = _open(4.3, 4.3, 40.0, "", "packet-loss robustness factor")
    Ppl: float | None = _open(0.0, 0.0, 20.0, "%", "packet-loss probability")
    BurstR: float | None = _open(1.0, 1.0, 8.0, "", "burst ratio")
    Nc: float = _planned(-70.0, -80.0, -40.0, "dBm0p", "circuit noise at the 0 dBr point")
    Nfor: float = _planned(-64.0, -64.0, -64.0, "dBmp", "noise floor at the receive side, which G.107 holds fixed")
    Ps: float = _planned(35.0, 35.0, 85.0, "dB(A)", "room noise at the send side")
    Pr: float = _planned(35.0, 35.0, 85.0, "dB(A)", "room noise at the receive side")
    A: float = _planned(
        0.0, 0.0, 20.0, "", "advantage: up to 5 in a building, 10 on the move, 20 for places hard to reach"
    )


PARAMETERS: dict[str, Parameter] = {one.name: one.metadata["parameter"] for one in fields(PlanningValues)}


@dataclass(frozen=True, slots=True)
class CodecValues:
    """Ie and Bpl of one encoding as the user knows them."""

    Ie: float
    Bpl: float | None = None
    """None where it is not known: the default of G.107 then stands in"""
