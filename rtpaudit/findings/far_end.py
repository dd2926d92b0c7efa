"""Rules about what the far receiver reports (RTCP): loss that only it saw, and reports that cannot be."""

from collections.abc import Iterator

import numpy as np

from rtpaudit.findings.case import Case
from rtpaudit.findings.facts import StreamFacts
from rtpaudit.findings.rule import AFTER, ENDPOINT, Evidence, rule
from rtpaudit.findings.words import many, pct
from rtpaudit.units import percent

FEWEST_INTERVALS = 5
CONCENTRATED = 0.8
"""share of the loss that a quarter of the reports' intervals hold, from which it came in bursts"""


def lost_after(case: Case, least_pct: float, in_bursts: bool) -> Iterator[Evidence]:
    """Loss that the far receiver reports and this capture does not show."""
    for facts in case.streams:
        figures = facts.assessed.figures
        after = figures.loss_after_pct
        concentrated = _concentrated(facts)
        if not after >= least_pct or (concentrated is True) != in_bursts:
            continue
        rated = facts.rated
        here = 0.0 if np.isnan(figures.loss_pct) else figures.loss_pct
        cost = rated.R(here, figures.burst_ratio) - rated.R(min(100.0, here + after), 1.0)
        told = (
            "most of it in few of the reports, so in bursts"
            if in_bursts
            else "and whether singly or in bursts its reports do not tell"
            if concentrated is None
            else "spread over its reports"
        )
        yield Evidence(
            measured=after,
            says=f"The {case.listener(facts)} reports that {pct(after)} of the packets to it were lost after they "
            f"had passed the capture point, {told}: the way before it is not to blame.",
            stream=facts.id,
            where=AFTER,
            confidence_pct=70.0 if concentrated is None else 80.0,
            r_points=cost,
            hidden_points=not rated.known,
            limit=least_pct,
            basis="RFC 3550, 6.4.1" if in_bursts else "",
            check_next="Capture nearer to that end: its access line, its radio, its own network.",
        )


@rule(
    "rtcp-contradicts", group="endpoint", limit=50.0, unit="%", basis="RFC 3550, 6.4.1",
    means="Reports of the far receiver cannot be true: they speak of numbers that were never sent, of negative or "
    "impossible loss, or of delays longer than the time between. They were set aside, and where packets were lost "
    "is less sure.",
    measured_as="share of the far receiver's report blocks on a stream that contradict the stream or themselves",
    check_next="Look at the software of the device that sends these reports, or at what rewrites streams without "
    "their reports.",
    severity="a concern",
)  # fmt: skip
def rtcp_contradicts(case: Case, limit: float) -> Iterator[Evidence]:
    """Reports that cannot be."""
    for facts in case.streams:
        far = facts.assessed.far_end
        if far is None or len(far.set_aside) < 2:
            continue
        doubted = [why for why in far.set_aside if why]
        share = percent(len(doubted), len(far.set_aside))
        if not share >= limit:
            continue
        usual = max(set(doubted), key=doubted.count)
        yield Evidence(
            measured=share,
            says=f"{len(doubted)} of {many(len(far.set_aside), 'report')} of the {case.listener(facts)} on what it "
            f"heard cannot be true ({usual}), so that they tell nothing about loss on its side.",
            stream=facts.id,
            where=ENDPOINT,
            confidence_pct=85.0,
            at_least="concern",
            at_most="concern",
        )


def _concentrated(facts: StreamFacts) -> bool | None:
    """Whether few of the intervals hold most of the loss behind the capture point; None for too few reports."""
    far = facts.assessed.far_end
    if far is None or far.between is None:
        return None
    good = np.array([not why for why in far.set_aside], np.bool_)
    loss = far.between.lost
    if not len(loss) == len(good) == len(far.captured_loss_pct):
        return None
    captured = np.nan_to_num(far.captured_loss_pct) * far.between.expected / 100.0
    behind = np.maximum(loss - captured, 0.0)[good & ~np.isnan(loss)]
    if len(behind) < FEWEST_INTERVALS or behind.sum() <= 0:
        return None
    few = max(1, len(behind) // 4)
    return bool(np.sort(behind)[-few:].sum() >= CONCENTRATED * behind.sum())
