"""What each side of a call heard, as plain values: rating, the way down to it, what another buffer would have done."""

import math
from collections.abc import Sequence
from typing import Any

from rtpaudit.assess.results import AssessedCall, AssessedStream
from rtpaudit.emodel.budget import STEPS, Budget, blended
from rtpaudit.emodel.g109 import quality_band
from rtpaudit.profile import Playout
from rtpaudit.report.plain import Row, number
from rtpaudit.report.plots import curve

STEP_WORDS = {
    "Ro": "A quiet line",
    "Is": "Speech level and sidetone",
    "Idte": "Talker echo",
    "Idle": "Listener echo",
    "Idd": "Delay",
    "Ie": "Coding",
    "loss": "Packets lost",
    "discards": "Packets too late",
    "A": "Allowance for convenience",
}

STEP_NOTES = {
    "Ro": "Basic signal-to-noise ratio: where a line stands that has nothing but the noise of circuit and rooms. "
    "Source: ITU-T G.107 (06/2015), 7.2.",
    "Is": "Simultaneous impairment: speech too loud, sidetone, quantizing. Source: ITU-T G.107 (06/2015), 7.3.",
    "Idte": "What the echo of one's own voice costs. Source: ITU-T G.107 (06/2015), 7.4.",
    "Idle": "What echoes of the far voice cost. Source: ITU-T G.107 (06/2015), 7.4.",
    "Idd": "What too long a way from mouth to ear costs, even without any echo. Source: ITU-T G.107 (06/2015), 7.4.",
    "Ie": "What the encoding costs without any loss. Source: ITU-T G.107 (06/2015), 7.5; ITU-T G.113, Appendix I.",
    "loss": "What packets cost that never came. Packets lost and packets too late share Ie,eff less Ie by their "
    "numbers. Source: ITU-T G.107 (06/2015), 7.5; the sharing is this audit’s own.",
    "discards": "What packets cost that came after the playout buffer had to play on. Source: ITU-T G.107 (06/2015), "
    "7.5; the sharing is this audit’s own.",
    "A": "Advantage factor: what callers put up with for the convenience. Source: ITU-T G.107 (06/2015), 7.6.",
    "R": "Transmission rating: what is left. 100 at best, below 50 not recommended. Source: ITU-T G.107 (06/2015), "
    "7.1; the words ITU-T G.109 (09/1999), table 1.",
}

# Which step of the rating a finding takes its points from, where it is one of these; every other has none of its own.
EXPLAINS = {
    "loss": (
        "random-loss", "loss-burst", "periodic-loss", "outage", "policing", "load", "loss-both-ways", "capture-drops",
    ),
    "discards": (
        "delay-spike", "periodic-delay", "jitter-beyond-buffer", "buffer-shallow", "route-change", "clock-skew",
        "sender-pacing", "reordering", "packet-time-change", "timestamp-fault", "load",
    ),
    "Idd": ("buffer-deep", "route-change"),
    "Idte": ("echo",),
    "Ie": ("second-transcoding", "encodings-differ"),
}  # fmt: skip


def ears(call: AssessedCall, findings: Sequence[Row], settings: Playout) -> list[dict[str, Any]]:
    """The caller's ear, then the callee's; ``findings`` in the order in which they are numbered."""
    sides = (
        ("caller", call.from_callee, call.figures.caller_hears_r),
        ("callee", call.from_caller, call.figures.callee_hears_r),
    )
    return [
        {
            "side": side,
            "r": number(rating),
            "band": "" if math.isnan(rating) else quality_band(rating),
            **_ear(streams, findings, settings),
        }
        for side, streams, rating in sides
    ]


def _ear(streams: Sequence[AssessedStream], findings: Sequence[Row], settings: Playout) -> dict[str, Any]:
    reaching = sorted(streams, key=lambda one: -one.figures.packets_expected)
    whole = _budget(reaching)
    shown = next((one for one in reaching if one.playback is not None), None)
    notes = dict.fromkeys(one.figures.rating_note for one in reaching if one.figures.rating_note)
    return {
        "streams": [one.id for one in streams],
        "note": "; ".join(notes),
        "budget": _steps(whole, [one.id for one in streams], findings) if whole else None,
        "curve": curve(shown, settings) if shown else None,
    }


def _budget(streams: Sequence[AssessedStream]) -> Budget | None:
    """The way to the rating of all that reached one ear; None where nothing of it is rated."""
    rated = [
        (one.budget, one.figures.packets_expected)
        for one in streams
        if one.budget is not None and not math.isnan(float(one.budget.R)) and one.figures.packets_expected > 0
    ]
    return blended([budget for budget, _ in rated], [weight for _, weight in rated]) if rated else None


def _steps(whole: Budget, streams: Sequence[str], findings: Sequence[Row]) -> dict[str, Any]:
    points = {name: float(value) for name, value in whole.steps()}
    return {
        "r": number(float(whole.R)),
        "steps": [
            {"step": name, "points": round(points[name], 2), "findings": _explained(name, streams, findings)}
            for name in STEPS
        ],
    }


def _explained(step: str, streams: Sequence[str], findings: Sequence[Row]) -> list[int]:
    """Numbers of the findings that a step is explained by."""
    causes = EXPLAINS.get(step, ())
    return [k for k, one in enumerate(findings, 1) if one["finding"] in causes and one["stream"] in (*streams, None)]
