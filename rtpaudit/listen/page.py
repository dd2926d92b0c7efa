"""The page of an outcome: sentences, a picture of prediction against opinion, and a table of the clips."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from rtpaudit import __version__
from rtpaudit.listen.accuracy import Mapping as FirstOrder
from rtpaudit.listen.sheet import SCALE
from rtpaudit.listen.templating import environment, own
from rtpaudit.listen.words import headline, sentences
from rtpaudit.report import shell

SIDE, LOW, HIGH = 420.0, 1.0, 5.0
"""of the picture, in its own units, and what its axes show [MOS]"""


def outcome_page(
    figures: Mapping[str, Any], tables: Mapping[str, Sequence[Mapping[str, Any]]], mapping: FirstOrder | None
) -> str:
    """The page as a text; all that listeners wrote is escaped by the template."""
    from markupsafe import Markup

    clips = tables["opinions"]
    template = environment().get_template("outcome.html")
    return template.render(
        policy=shell.policy([]),
        stylesheet=Markup(shell.stylesheet() + own("outcome.css")),
        heading=headline(figures),
        told=sentences(figures),
        clips=clips,
        listeners=tables["listeners"],
        comments=[row for row in tables["votes"] if row["comment"]],
        points=[_point(row) for row in clips if None not in (row["mean_opinion"], row["predicted_mos"])],
        line=_line(mapping) if mapping else None,
        ticks=[(vote, x_of(vote), y_of(vote)) for vote in sorted(SCALE)],
        side=SIDE,
        version=__version__,
    )


def x_of(mos: float) -> float:
    """Place on the axis of predictions."""
    return round((mos - LOW) / (HIGH - LOW) * SIDE, 2)


def y_of(mos: float) -> float:
    """Place on the axis of opinions, which points up."""
    return round(SIDE - x_of(mos), 2)


def _point(row: Mapping[str, Any]) -> dict[str, Any]:
    low, high = (
        row[name] if row[name] is not None else row["mean_opinion"] for name in ("interval_low", "interval_high")
    )
    return {
        "clip": row["clip"],
        "kind": row["kind"],
        "x": x_of(row["predicted_mos"]),
        "y": y_of(row["mean_opinion"]),
        "top": y_of(min(high, HIGH)),
        "foot": y_of(max(low, LOW)),
        "title": f"{row['clip']}: opinion {row['mean_opinion']:.2f}, predicted {row['predicted_mos']:.2f}",
    }


def _line(mapping: FirstOrder) -> dict[str, float]:
    """The first-order mapping within the picture."""
    ends = np.array([LOW, HIGH])
    inside = (np.clip(mapping(ends), LOW, HIGH) - mapping.offset) / mapping.slope
    opinion = mapping(inside)
    return {"x1": x_of(inside[0]), "y1": y_of(opinion[0]), "x2": x_of(inside[1]), "y2": y_of(opinion[1])}
