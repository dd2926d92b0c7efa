"""The rating R and its parts (ITU-T G.107, 06/2015), with the symbols of the Recommendation.

R = Ro - Is - Id - Ie,eff + A. R is not bounded here: it falls below 0 and, with an advantage, rises over 100.
"""

from dataclasses import dataclass, fields
from typing import overload

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rtpaudit.planning import PARAMETERS, PlanningValues

Values = NDArray[np.float64]

# The parts are rounded to this grid (2 to the power of -32, 2.3e-10), far below any meaning, so that sums of them
# are exact in floating point and a budget adds up to R to the last bit.
GRID = 2.0**-32

LOSS_CEILING = 95.0
"""Ie,eff that a connection tends to as everything is lost. ITU-T G.107 (06/2015), 7.5"""


@dataclass(frozen=True, slots=True)
class Parts:
    """The rating and what it is made of; all arrays have the same shape, that of the arguments together."""

    No: Values
    """all noise together at the 0 dBr point [dBm0p]; not a step of the sum"""
    Ro: Values
    """basic signal-to-noise ratio"""
    Iolr: Values
    """too low an overall loudness rating; part of Is"""
    Ist: Values
    """sidetone that is not right; part of Is"""
    Iq: Values
    """quantisation distortion; part of Is"""
    Is: Values
    """all that comes with the voice itself"""
    Idte: Values
    """talker echo"""
    Idle: Values
    """listener echo"""
    Idd: Values
    """delay without any echo"""
    Ie: Values
    """codec alone; part of Ie_eff"""
    Ie_eff: Values
    """codec and packet loss together"""
    A: Values
    """advantage of access"""
    R: Values
    """rating factor"""


def on_grid(values: ArrayLike) -> Values:
    """Numbers rounded to the grid on which parts of a rating add up exactly."""
    return np.asarray(np.rint(np.asarray(values, np.float64) / GRID) * GRID)


def effective_equipment_impairment(
    Ie: ArrayLike, Bpl: ArrayLike, Ppl: ArrayLike = 0.0, BurstR: ArrayLike = 1.0
) -> Values:
    """Effective equipment impairment factor of a codec under packet loss.

    Parameters
    ----------
    Ie : float or array
        Equipment impairment factor without loss. [no unit]
    Bpl : float or array
        Packet-loss robustness factor, over 0. [no unit]
    Ppl : float or array
        Lost and discarded packets in percent of those expected, 0 to 100. [%]
    BurstR : float or array
        Burst ratio; below 1, or NaN because nothing was lost, it counts as 1. [no unit]

    Returns
    -------
    float64 array, common shape of the arguments
        Ie,eff, between Ie and 95 where Ie is at most 95. [R points]

    Raises
    ------
    ValueError
        If Ppl is not a percentage, or Bpl is not over 0.

    References
    ----------
    ITU-T G.107 (06/2015), 7.5, equation 7-29.
    """
    Ie, Bpl, Ppl = (np.asarray(each, np.float64) for each in (Ie, Bpl, Ppl))
    if np.any((Ppl < 0.0) | (Ppl > 100.0)):
        raise ValueError("Ppl is a percentage from 0 to 100, not a share and not a count")
    if np.any(Bpl <= 0.0):
        raise ValueError("Bpl is over 0: 4.3 for a codec that conceals nothing")
    return np.asarray(Ie + (LOSS_CEILING - Ie) * Ppl / (Ppl / _at_least_one(BurstR) + Bpl))


def delay_impairment(Ta: ArrayLike, sT: float = 1.0, mT: float = 100.0) -> Values:
    """Impairment Idd by delay alone, which grows from mT on.

    Parameters
    ----------
    Ta : float or array
        Absolute one-way delay; below 0 it counts as 0, NaN stays NaN. [ms]
    sT : float
        Delay sensitivity of the listeners. [no unit]
    mT : float
        Least delay that they notice. [ms]

    Returns
    -------
    float64 array, shape of ``Ta``
        Idd, 0 up to mT. [R points]

    References
    ----------
    ITU-T G.107 (06/2015), 7.4, equations 7-27 and 7-28; sT and mT by Table 1.
    """
    X = np.log2(np.maximum(np.asarray(Ta, np.float64), mT) / mT)
    power = 6.0 * sT
    return np.asarray(25.0 * ((1.0 + X**power) ** (1 / power) - 3.0 * (1.0 + (X / 3.0) ** power) ** (1 / power) + 2.0))


def rating(
    planning: PlanningValues | None = None,
    *,
    Ta: ArrayLike | None = None,
    T: ArrayLike | None = None,
    Tr: ArrayLike | None = None,
    Ie: ArrayLike | None = None,
    Bpl: ArrayLike | None = None,
    Ppl: ArrayLike | None = None,
    BurstR: ArrayLike | None = None,
    TELR: ArrayLike | None = None,
) -> Parts:
    """Transmission rating with all its parts.

    Parameters
    ----------
    planning : PlanningValues, optional
        What is known beforehand; the defaults of G.107 where left out. A parameter that it sets (is not None) stands,
        whatever the arguments below say.
    Ta : float or array, optional
        Absolute one-way delay. [ms]
    T : float or array, optional
        One-way delay of the echo path; ``Ta`` where left out. [ms]
    Tr : float or array, optional
        Round-trip delay; twice ``T`` where left out. [ms]
    Ie, Bpl : float or array, optional
        Of the codec; 0 and 4.3 where left out. [no unit]
    Ppl : float or array, optional
        Lost and discarded packets, 0 to 100; 0 where left out. [%]
    BurstR : float or array, optional
        Burst ratio; below 1 or NaN it counts as 1. [no unit]
    TELR : float or array, optional
        Talker echo loudness rating; 65 where left out. [dB]

    Returns
    -------
    Parts
        Arrays in the common shape of the arguments, shape () where all are numbers. NaN in gives NaN out, but for
        BurstR. Values outside the ranges of G.107 are rated by the formula; ``rating_note`` speaks of them.

    Raises
    ------
    ValueError
        If Ppl is not a percentage, or Bpl is not over 0.

    Notes
    -----
    The parts are rounded to 2.3e-10, so that they add up to R exactly. A negative delay, an artefact of clocks that
    do not agree, counts as 0.

    References
    ----------
    ITU-T G.107 (06/2015), 7.1 to 7.7.
    """
    given = planning or PlanningValues()
    Ta = _chosen(given.Ta, Ta, PARAMETERS["Ta"].default)
    T = _chosen(given.T, T, Ta)
    Tr = _chosen(given.Tr, Tr, 2.0 * T)
    TELR = _chosen(given.TELR, TELR, PARAMETERS["TELR"].default)
    Ie = _chosen(given.Ie, Ie, PARAMETERS["Ie"].default)
    Ie_eff = effective_equipment_impairment(
        Ie,
        _chosen(given.Bpl, Bpl, PARAMETERS["Bpl"].default),
        _chosen(given.Ppl, Ppl, PARAMETERS["Ppl"].default),
        _chosen(given.BurstR, BurstR, PARAMETERS["BurstR"].default),
    )
    T, Tr = np.maximum(T, 0.0), np.maximum(Tr, 0.0)
    No = _noise(given)
    Ro = 15.0 - 1.5 * (given.SLR + No)
    Ist = _sidetone(given.STMR, T, TELR)
    return _assembled(
        No=No,
        Ro=Ro,
        Iolr=_loudness(given, No),
        Ist=Ist,
        Iq=_quantisation(Ro, given.qdu),
        Idte=_talker_echo(given, No, Ist, T, TELR),
        Idle=_listener_echo(Ro, given.WEPL, Tr),
        Idd=delay_impairment(Ta, given.sT, given.mT),
        Ie=Ie,
        Ie_eff=Ie_eff,
        A=given.A,
    )


@overload
def mos_from_r(R: float) -> float: ...
@overload
def mos_from_r(R: Values) -> Values: ...
def mos_from_r(R: float | Values) -> float | Values:
    """Conversational MOS (MOS-CQE) of a rating.

    Parameters
    ----------
    R : float or array
        Rating factor. [no unit]

    Returns
    -------
    float or float64 array, shape of ``R``
        From 0.989 to 4.5; NaN stays NaN. [MOS]

    Notes
    -----
    The cubic holds from R = 0 on, as Annex B says, though it dips below 1 for R under 6.5 (least 0.989 at 3.2).
    There is no further clamp: below R = 0 the MOS is 1, over R = 100 it is 4.5.

    References
    ----------
    ITU-T G.107 (06/2015), Annex B.
    """
    bounded = np.clip(np.asarray(R, np.float64), 0.0, 100.0)
    mos = 1.0 + 0.035 * bounded + bounded * (bounded - 60.0) * (100.0 - bounded) * 7e-6
    return mos if isinstance(R, np.ndarray) else float(mos)


def _chosen(planned: float | None, measured: ArrayLike | None, default: ArrayLike) -> Values:
    return np.asarray(planned if planned is not None else default if measured is None else measured, np.float64)


def _at_least_one(BurstR: ArrayLike) -> Values:
    BurstR = np.asarray(BurstR, np.float64)
    return np.where(BurstR >= 1.0, BurstR, 1.0)


def _noise(given: PlanningValues) -> float:
    """Sum No of all noise at the 0 dBr point. [dBm0p]  ITU-T G.107 (06/2015), 7.2, equations 7-3 to 7-7."""
    OLR = given.SLR + given.RLR
    Nos = given.Ps - given.SLR - given.Ds - 100.0 + 0.004 * (given.Ps - OLR - given.Ds - 14.0) ** 2
    LSTR = given.STMR + given.Dr if given.LSTR is None else given.LSTR
    Pre = given.Pr + 10.0 * np.log10(1.0 + 10.0 ** ((10.0 - LSTR) / 10.0))
    Nor = given.RLR - 121.0 + Pre + 0.008 * (Pre - 35.0) ** 2
    Nfo = given.Nfor + given.RLR
    return float(10.0 * np.log10(sum(10.0 ** (each / 10.0) for each in (given.Nc, Nos, Nor, Nfo))))


def _loudness(given: PlanningValues, No: float) -> float:
    """Impairment Iolr of too low an overall loudness rating. ITU-T G.107 (06/2015), 7.3, equations 7-9 and 7-10."""
    Xolr = given.SLR + given.RLR + 0.2 * (64.0 + No - given.RLR)
    return 20.0 * float((1.0 + (Xolr / 8.0) ** 8) ** (1 / 8) - Xolr / 8.0)


def _sidetone(STMR: float, T: Values, TELR: Values) -> Values:
    """Impairment Ist of sidetone that is not right. ITU-T G.107 (06/2015), 7.3, equations 7-11 and 7-12."""
    STMRo = -10.0 * np.log10(10.0 ** (-STMR / 10.0) + np.exp(-T / 4.0) * 10.0 ** (-TELR / 10.0))
    return np.asarray(
        12.0 * (1.0 + ((STMRo - 13.0) / 6.0) ** 8) ** (1 / 8)
        - 28.0 * (1.0 + ((STMRo + 1.0) / 19.4) ** 35) ** (1 / 35)
        - 13.0 * (1.0 + ((STMRo - 3.0) / 33.0) ** 13) ** (1 / 13)
        + 29.0
    )


def _quantisation(Ro: float, qdu: float) -> float:
    """Impairment Iq of quantisation distortion. ITU-T G.107 (06/2015), 7.3, equations 7-13 to 7-17."""
    Q = 37.0 - 15.0 * np.log10(qdu)
    G = 1.07 + 0.258 * Q + 0.0602 * Q**2
    Y = (Ro - 100.0) / 15.0 + 46.0 / 8.4 - G / 9.0
    Z = 46.0 / 30.0 - G / 40.0
    return 15.0 * float(np.log10(1.0 + 10.0**Y + 10.0**Z))


def _talker_echo(given: PlanningValues, No: float, Ist: Values, T: Values, TELR: Values) -> Values:
    """Impairment Idte of talker echo. ITU-T G.107 (06/2015), 7.4, equations 7-19 to 7-24.

    It is 0 below 1 ms, and a little below 0 up to 4 ms: the Recommendation does not clamp it.
    """
    TERV = TELR - 40.0 * np.log10((1.0 + T / 10.0) / (1.0 + T / 150.0)) + 6.0 * np.exp(-0.3 * T**2)
    if given.STMR < 9.0:
        TERV = TERV + Ist / 2.0
    Roe = -1.5 * (No - given.RLR)
    Re = 80.0 + 2.5 * (TERV - 14.0)
    echo = ((Roe - Re) / 2.0 + np.sqrt((Roe - Re) ** 2 / 4.0 + 100.0) - 1.0) * (1.0 - np.exp(-T))
    echo = np.where(T < 1.0, 0.0, echo)
    return np.sqrt(echo**2 + Ist**2) if given.STMR > 20.0 else echo


def _listener_echo(Ro: float, WEPL: float, Tr: Values) -> Values:
    """Impairment Idle of listener echo. ITU-T G.107 (06/2015), 7.4, equations 7-25 and 7-26."""
    Rle = 10.5 * (WEPL + 7.0) * (Tr + 1.0) ** -0.25
    return np.asarray((Ro - Rle) / 2.0 + np.sqrt((Ro - Rle) ** 2 / 4.0 + 169.0))


def _assembled(**parts: ArrayLike) -> Parts:
    """The parts on the grid and in one shape, with Is and R, their sums."""
    exact = {name: on_grid(each) for name, each in parts.items()}
    exact["Is"] = exact["Iolr"] + exact["Ist"] + exact["Iq"]
    delays = exact["Idte"] + exact["Idle"] + exact["Idd"]
    exact["R"] = np.asarray(exact["Ro"] - exact["Is"] - delays - exact["Ie_eff"] + exact["A"])
    shape = exact["R"].shape
    return Parts(**{one.name: np.broadcast_to(exact[one.name], shape) for one in fields(Parts)})
