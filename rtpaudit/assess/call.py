"""Both directions of a call together: what each side heard, and which was the worse."""

import math
from collections.abc import Sequence

from rtpaudit.assess.counted import Counted
from rtpaudit.assess.pairs import CallSound
from rtpaudit.assess.results import AssessedCall, AssessedStream, CallFigures
from rtpaudit.emodel.g107 import mos_from_r
from rtpaudit.emodel.g109 import quality_band
from rtpaudit.media.calls import Call
from rtpaudit.units import NS_PER_S, percent

NAN = float("nan")


def assess_call(
    call: Call,
    from_caller: list[AssessedStream],
    from_callee: list[AssessedStream],
    counted: Counted,
    sound: CallSound | None = None,
) -> AssessedCall:
    """One call with its figures."""
    for stream in from_caller + from_callee:
        stream.call = call.id
    encodings = dict.fromkeys(one.stream.encoding for one in from_caller + from_callee)
    said = call.signalled
    answered_ns = said.answered_ns if said else None
    begun_ns = call.started_ns if answered_ns is None else answered_ns
    return AssessedCall(
        id=call.id,
        conversation=call.conversation,
        capture=call.capture,
        call_id=said.call_id if said else "",
        caller=call.caller,
        callee=call.callee,
        started_ns=call.started_ns,
        answered_ns=answered_ns,
        ended_ns=call.ended_ns,
        duration_s=(call.ended_ns - begun_ns) / NS_PER_S,
        outcome=said.outcome if said else "media only",
        status_code=said.status_code if said else None,
        setup_delay_s=said.setup_delay_s if said else NAN,
        release_by=said.release_by if said else "",
        encoding="/".join(encodings),
        from_caller=from_caller,
        from_callee=from_callee,
        figures=call_figures(from_caller, from_callee, counted),
        signalled=said,
        unseen=call.unseen,
        sound=sound,
        near=call.near,
    )


def call_figures(
    from_caller: Sequence[AssessedStream], from_callee: Sequence[AssessedStream], counted: Counted
) -> CallFigures:
    """What each side heard, and the figures of the worse direction."""
    callee_hears, caller_hears = (
        weighted([(counted[one.id].r_factor, counted[one.id].packets) for one in side])
        for side in (from_caller, from_callee)
    )
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
    return weighted([(getattr(one.figures, figure), one.figures.packets_expected) for one in streams])


def weighted(pairs: Sequence[tuple[float, int]]) -> float:
    """Mean of values by their weights; NaN where no value is known, or nothing weighs."""
    known = [(value, weight) for value, weight in pairs if not math.isnan(value)]
    whole = sum(weight for _, weight in known)
    return sum(value * weight for value, weight in known) / whole if whole else NAN


def _loss(streams: Sequence[AssessedStream]) -> float:
    lost = sum(one.figures.packets_lost for one in streams)
    return percent(lost, sum(one.figures.packets_expected for one in streams))
