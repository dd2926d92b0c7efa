"""Trend lines: a measure over nights as a small drawing that needs no script."""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, timedelta

WIDTH, HEIGHT = 320.0, 84.0
LEFT, RIGHT, TOP, BOTTOM = 44.0, 8.0, 8.0, 20.0


@dataclass(frozen=True, slots=True)
class Line:
    """One drawing: what the template puts into its SVG."""

    title: str
    pieces: tuple[str, ...]
    """points of each run of nights without a hole"""
    dots: tuple[tuple[str, str], ...]
    """nights that stand alone"""
    last: tuple[str, str]
    high: str
    low: str
    first_night: str
    last_night: str
    level: str
    """height of the mean of the nights before; empty where there are none"""
    told: str
    """the drawing in words"""


def trend_line(title: str, unit: str, nights: Sequence[date], values: Sequence[float]) -> Line | None:
    """A measure over nights, None where fewer than two nights have it."""
    points = [(night, value) for night, value in zip(nights, values, strict=True) if value == value]
    if len(points) < 2:
        return None
    low, high = min(value for _, value in points), max(value for _, value in points)
    days = max((points[-1][0] - points[0][0]).days, 1)

    def place(night: date, value: float) -> tuple[str, str]:
        x = LEFT + (WIDTH - LEFT - RIGHT) * (night - points[0][0]).days / days
        share = (value - low) / (high - low) if high > low else 0.5
        return f"{x:.1f}", f"{HEIGHT - BOTTOM - (HEIGHT - TOP - BOTTOM) * share:.1f}"

    runs: list[list[tuple[date, float]]] = []
    for point in points:
        if runs and point[0] - runs[-1][-1][0] == timedelta(days=1):
            runs[-1].append(point)
        else:
            runs.append([point])
    mean = sum(value for _, value in points[:-1]) / (len(points) - 1)
    suffix = f" {unit}" if unit else ""
    return Line(
        title=title,
        pieces=tuple(" ".join(",".join(place(*point)) for point in run) for run in runs if len(run) > 1),
        dots=tuple(place(*run[0]) for run in runs if len(run) == 1),
        last=place(*points[-1]),
        high=f"{high:.3g}",
        low=f"{low:.3g}" if low < high else "",
        first_night=points[0][0].isoformat(),
        last_night=points[-1][0].isoformat(),
        level=place(points[-1][0], min(max(mean, low), high))[1],
        told=(
            f"{title}: {points[-1][1]:.3g}{suffix} in the last night, {mean:.3g}{suffix} on average over "
            f"{len(points) - 1} nights before, between {low:.3g} and {high:.3g}"
        ),
    )
