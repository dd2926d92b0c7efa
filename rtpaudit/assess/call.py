"""Both directions of a call together: what each side heard, and which was the worse."""

import math
from collections.abc import Sequence

from rtpaudit.assess.results import AssessedCall, AssessedStream, CallFigures
from rtpaudit.emodel.g107 import mos_from_r
from rtpaudit.emodel.g109 import quality_band
from rtpaudit.media.calls import Call
from rtpaudit.units import NS_PER_S, percent

NAN = float("nan")


def assess_call(
    number: int, call: Call, from_caller: list[AssessedStream], from_callee: list[AssessedStream]
) -> AssessedCall:
    """One call with its figures; ``number`` counts from 1."""
    identifier = f"c{number:02d}"
    for stream in from_caller + from_callee:
        stream.call = identifier
    encodings = dict.fromkeys(one.stream.encoding for one in from_caller + from_callee)
    return AssessedCall(
        id=identifier,
        conversation=f"v{number:02d}",
        capture=call.capture,
        call_id="",
        caller=call.caller,
        callee=call.callee,
        started_ns=call.started_ns,
        answered_ns=None,
        ended_ns=call.ended_ns,
        duration_s=(call.ended_ns - call.started_ns) / NS_PER_S,
        outcome="media only",
        status_code=None,
        setup_delay_s=NAN,
        release_by="",
        encoding="/".join(encodings),
        from_caller=from_caller,
        from_callee=from_callee,
        figures=call_figures(from_caller, from_callee),
    )


def call_figures(from_caller: Sequence[AssessedStream], from_callee: Sequence[AssessedStream]) -> CallFigures:
    """What each side heard, and the figures of the worse direction."""
    callee_hears, caller_hears = together(from_caller, "r_factor"), together(from_callee, "r_factor")
    directions = [(caller_hears, from_callee), (callee_hears, from_caller)]
    # The lower rating is the worse; where there is none, the greater loss.
    R, worse = min(
        (one for one in directions if one[1]),
        key=lambda one: (math.inf if math.isnan(one[0]) else one[0], -_loss(one[1])),
        default=(NAN, []),
    )
    return CallFigures(
        caller_hears_r=caller_hears,
        callee_hears_r=callee_hears,
        r_factor=R,
        mos_cqe=mos_from_r(R),
        quality_band="" if math.isnan(R) else quality_band(R),
        loss_pct=_loss(worse),
        jitter_ms=together(worse, "jitter_ms"),
        one_way_delay_ms=together(worse, "one_way_delay_ms"),
    )


def together(streams: Sequence[AssessedStream], figure: str) -> float:
    """Mean of a figure over the streams of one direction, weighted by expected packets; NaN where none has it."""
    pairs = [(getattr(one.figures, figure), one.figures.packets_expected) for one in streams]
    known = [(value, weight) for value, weight in pairs if not math.isnan(value)]
    weight = sum(weight for _, weight in known)
    return sum(value * own for value, own in known) / weight if weight else NAN


def _loss(streams: Sequence[AssessedStream]) -> float:
    lost = sum(one.figures.packets_lost for one in streams)
    return percent(lost, sum(one.figures.packets_expected for one in streams))
