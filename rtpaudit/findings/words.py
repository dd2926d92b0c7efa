"""Figures as people write them in a ticket."""

import math


def number(value: float) -> str:
    """Three significant digits at most, and no power of ten."""
    if math.isnan(value):
        return "unknown"
    return f"{value:,.0f}" if abs(value) >= 100 else f"{value:.3g}"


def pct(value: float) -> str:
    """A share. [%]"""
    return f"{number(value)} %"


def ms(value: float) -> str:
    """A short time: from 1 s on in seconds. [ms]"""
    return f"{number(value)} ms" if value < 1000 else f"{number(value / 1000)} s"


def seconds(value: float) -> str:
    """A time: from two minutes on in minutes and seconds. [s]"""
    if value < 120:
        return f"{number(value)} s"
    minutes, rest = divmod(round(value), 60)
    return f"{minutes} min {rest} s"


def many(count: float, thing: str) -> str:
    """A count with its noun."""
    whole = round(count)
    return f"{whole:,} {thing}" if whole == 1 else f"{whole:,} {thing}s"


def times(count: float) -> str:
    """How often something happened."""
    whole = round(count)
    return {1: "once", 2: "twice"}.get(whole, f"{whole:,} times")
