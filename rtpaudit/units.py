"""Units: the factors between what the wire carries and what people read."""

NS_PER_S = 1_000_000_000
NS_PER_MS = 1_000_000
MS_PER_S = 1000.0

PCMU_DBM0_AT_0_DBOV = 6.18
"""Level in dBm0 of a 0 dBov signal in mu-law. ITU-T G.711 overload 3.17 dBm0 for a sine, which is -3.01 dBov."""

PCMA_DBM0_AT_0_DBOV = 6.15
"""The same in A-law: overload 3.14 dBm0."""


def percent(part: float, whole: float) -> float:
    """Share of ``whole`` in percent, NaN where there is no whole. [%]"""
    return 100.0 * part / whole if whole else float("nan")
