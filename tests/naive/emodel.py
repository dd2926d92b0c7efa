"""Slow twin of the E-model: ITU-T G.107 (06/2015), clause 7, equation after equation, one connection at a time."""

from math import exp, log, log10, sqrt

DEFAULTS = {
    "SLR": 8.0, "RLR": 2.0, "STMR": 15.0, "Ds": 3.0, "Dr": 3.0, "TELR": 65.0, "WEPL": 110.0, "T": 0.0, "Tr": 0.0,
    "Ta": 0.0, "sT": 1.0, "mT": 100.0, "qdu": 1.0, "Ie": 0.0, "Bpl": 4.3, "Ppl": 0.0, "BurstR": 1.0, "Nc": -70.0,
    "Nfor": -64.0, "Ps": 35.0, "Pr": 35.0, "A": 0.0,
}  # fmt: skip


def parts(**settings):
    """Every named quantity of clause 7, by its symbol."""
    p = DEFAULTS | settings
    LSTR = settings.get("LSTR", p["STMR"] + p["Dr"])
    # 7.2
    Nos = p["Ps"] - p["SLR"] - p["Ds"] - 100 + 0.004 * (p["Ps"] - (p["SLR"] + p["RLR"]) - p["Ds"] - 14) ** 2
    Pre = p["Pr"] + 10 * log10(1 + 10 ** ((10 - LSTR) / 10))
    Nor = p["RLR"] - 121 + Pre + 0.008 * (Pre - 35) ** 2
    Nfo = p["Nfor"] + p["RLR"]
    No = 10 * log10(10 ** (p["Nc"] / 10) + 10 ** (Nos / 10) + 10 ** (Nor / 10) + 10 ** (Nfo / 10))
    Ro = 15 - 1.5 * (p["SLR"] + No)
    # 7.3
    Xolr = p["SLR"] + p["RLR"] + 0.2 * (64 + No - p["RLR"])
    Iolr = 20 * ((1 + (Xolr / 8) ** 8) ** (1 / 8) - Xolr / 8)
    STMRo = -10 * log10(10 ** (-p["STMR"] / 10) + exp(-p["T"] / 4) * 10 ** (-p["TELR"] / 10))
    Ist = 12 * (1 + ((STMRo - 13) / 6) ** 8) ** (1 / 8)
    Ist -= 28 * (1 + ((STMRo + 1) / 19.4) ** 35) ** (1 / 35)
    Ist -= 13 * (1 + ((STMRo - 3) / 33) ** 13) ** (1 / 13)
    Ist += 29
    Q = 37 - 15 * log10(p["qdu"])
    G = 1.07 + 0.258 * Q + 0.0602 * Q * Q
    Iq = 15 * log10(1 + 10 ** ((Ro - 100) / 15 + 46 / 8.4 - G / 9) + 10 ** (46 / 30 - G / 40))
    # 7.4
    TERV = p["TELR"] - 40 * log10((1 + p["T"] / 10) / (1 + p["T"] / 150)) + 6 * exp(-0.3 * p["T"] ** 2)
    if p["STMR"] < 9:
        TERV += Ist / 2
    Roe = -1.5 * (No - p["RLR"])
    Re = 80 + 2.5 * (TERV - 14)
    Idte = 0.0
    if p["T"] >= 1:
        Idte = ((Roe - Re) / 2 + sqrt((Roe - Re) ** 2 / 4 + 100) - 1) * (1 - exp(-p["T"]))
    if p["STMR"] > 20:
        Idte = sqrt(Idte**2 + Ist**2)
    Rle = 10.5 * (p["WEPL"] + 7) / (p["Tr"] + 1) ** 0.25
    Idle = (Ro - Rle) / 2 + sqrt((Ro - Rle) ** 2 / 4 + 169)
    Idd = 0.0
    if p["Ta"] > p["mT"]:
        X = log(p["Ta"] / p["mT"]) / log(2)
        s = p["sT"]
        Idd = 25 * ((1 + X ** (6 * s)) ** (1 / (6 * s)) - 3 * (1 + (X / 3) ** (6 * s)) ** (1 / (6 * s)) + 2)
    # 7.5 to 7.7
    Ie_eff = p["Ie"] + (95 - p["Ie"]) * p["Ppl"] / (p["Ppl"] / p["BurstR"] + p["Bpl"])
    Is = Iolr + Ist + Iq
    R = Ro - Is - Idte - Idle - Idd - Ie_eff + p["A"]
    return {
        "No": No, "Ro": Ro, "Iolr": Iolr, "Ist": Ist, "Iq": Iq, "Is": Is, "Idte": Idte, "Idle": Idle, "Idd": Idd,
        "Ie": p["Ie"], "Ie_eff": Ie_eff, "A": p["A"], "R": R,
    }  # fmt: skip
