"""The outcome of a listening check in words."""

from collections.abc import Mapping, Sequence
from typing import Any

from rtpaudit.findings.words import many


def outcome_text(figures: Mapping[str, Any], clips: Sequence[Mapping[str, Any]]) -> str:
    """Some sentences, then a line for each clip, worst opinion first."""
    return "\n".join([*sentences(figures), "", *map(_line, clips)])


def headline(figures: Mapping[str, Any]) -> str:
    """What the check says of the prediction, as short as can be."""
    if figures["rmse"] is None or figures["correlation"] is None:
        return f"{many(figures['listeners'], 'listener')} rated {many(figures['clips'], 'clip')}."
    over, r, error = many(figures["compared_clips"], "clip"), figures["correlation"], figures["rmse"]
    return f"Over {over}, prediction and opinion correlate by {r:.2f} and differ by {error:.2f} MOS."


def sentences(figures: Mapping[str, Any]) -> list[str]:
    """What the check says as a whole."""
    counts = (
        f"{many(figures['listeners'], 'listener')}, {many(figures['clips'], 'clip')}, {many(figures['votes'], 'vote')}"
    )
    told = [f"Listening check {figures['check']}: {counts}.", _agreement(figures), _prediction(figures)]
    if figures["votes_replaced"]:
        told.append(f"{many(figures['votes_replaced'], 'vote')} gave way to a later one of the same sheet.")
    return told


def _agreement(figures: Mapping[str, Any]) -> str:
    alpha = figures["krippendorff_alpha_ordinal"]
    if alpha is None:
        return "Nothing can be said on how far listeners agree: it takes two, and votes that differ."
    return (
        f"Agreement between listeners: {alpha:.2f} (Krippendorff's alpha, ordinal; 1 is full agreement, 0 is chance)."
    )


def _prediction(figures: Mapping[str, Any]) -> str:
    if figures["rmse"] is None or figures["correlation"] is None:
        return "There are too few rated clips with a prediction to compare the two."
    low, high = figures["correlation_low"], figures["correlation_high"]
    within = "" if low is None else f" (95 % interval {low:.2f} to {high:.2f})"
    text = (
        f"Prediction against opinion over {many(figures['compared_clips'], 'clip')}: "
        f"correlation {figures['correlation']:.2f}{within}, error {figures['rmse']:.2f} MOS"
    )
    if figures["rmse_mapped"] is None:
        return f"{text}."
    text += f", {figures['rmse_mapped']:.2f} after a first-order mapping"
    if figures["rmse_epsilon"] is None:
        return f"{text} (ITU-T P.1401)."
    return f"{text}, {figures['rmse_epsilon']:.2f} beyond the listeners' own uncertainty (RMSE*, ITU-T P.1401)."


def _line(clip: Mapping[str, Any]) -> str:
    mean, low, predicted = clip["mean_opinion"], clip["interval_low"], clip["predicted_mos"]
    opinion = "not rated" if mean is None else f"{mean:.2f}" if low is None else f"{mean:.2f} ± {mean - low:.2f}"
    expected = "no prediction" if predicted is None else f"predicted {predicted:.2f}"
    what = f"{clip['call']} {clip['stream']}, {clip['kind']}: {clip['reason']}"
    return f"{clip['clip']}  {opinion:12}  {expected:14}  {what}"
