"""Findings: assessed calls come in; causes with evidence, weighed against each other, and a headline a call go out."""

import math
from collections import defaultdict
from itertools import groupby

from rtpaudit.assess.results import Assessment
from rtpaudit.findings import (  # noqa: F401 (to register their rules)
    agreement,
    buffers,
    capturing,
    coding,
    dead_air,
    endpoint,
    far_end,
    network,
    path,
    signalling,
    sound,
    variation,
)
from rtpaudit.findings.case import Case, Whole
from rtpaudit.findings.rule import (
    CATALOGUE,
    COMMON_PRACTICE,
    PROFILE,
    SEVERITIES,
    Evidence,
    Finding,
    Rule,
    severity_of,
)
from rtpaudit.findings.share import Claim, points_of, settle
from rtpaudit.profile import Profile

__all__ = ["CATALOGUE", "COMMON_PRACTICE", "Finding", "diagnose"]

LEAST_SHARE = 0.1
"""of the packets that it first explained, below which a cause without a word of its own is not told"""


def diagnose(assessment: Assessment, profile: Profile) -> list[Finding]:
    """Run every rule on every call; sets the headline of each.

    Returns
    -------
    list of Finding
        By call, the gravest first.

    Raises
    ------
    UnusableProfile
        If the profile has a limit for a finding that does not exist.
    """
    profile.check_limits(CATALOGUE)
    whole = Whole(assessment, profile)
    findings: list[Finding] = []
    for call in assessment.calls:
        case = Case(call, whole)
        weighed = _weigh(case)
        for facts in case.streams:
            facts.forget()
        call.headline = next((one.finding for one in weighed if one.severity != "remark"), "")
        findings += weighed
    return findings


def _weigh(case: Case) -> list[Finding]:
    """Findings of one call, the gravest first."""
    found: list[tuple[Rule, Evidence]] = []
    rules = sorted(CATALOGUE.values(), key=lambda one: one.tier)
    for _, of_tier in groupby(rules, key=lambda one: one.tier):
        tier = [(one, evidence) for one in of_tier for evidence in one.judge(case, _limit(one, case.profile))]
        _settle(case, [evidence for _, evidence in tier])
        found += tier
    graded = [_finding(case, one, evidence) for one, evidence in found if _stands(evidence)]
    return [finding for _, finding in sorted(graded, key=lambda one: one[0], reverse=True)]


def _limit(one: Rule, profile: Profile) -> float:
    return float(profile.limits.get(one.name, one.limit))


def _settle(case: Case, tier: list[Evidence]) -> None:
    """Share the packets of each stream among the causes of one tier."""
    by_stream: dict[str, list[Claim]] = defaultdict(list)
    for evidence in tier:
        for one in evidence.claims:
            by_stream[one.facts.id].append(one)
    for claims in by_stream.values():
        facts = claims[0].facts
        case.leave(facts, settle(claims, case.left(facts)))


def _stands(evidence: Evidence) -> bool:
    """Whether anything is left to tell once the packets have been shared out."""
    claimed = sum(one.wanted for one in evidence.claims)
    return (
        evidence.at_least != "remark"
        or claimed == 0
        or sum(one.packets for one in evidence.claims) >= LEAST_SHARE * claimed
    )


def _finding(case: Case, one: Rule, evidence: Evidence) -> tuple[tuple[float, ...], Finding]:
    """The row, and its rank: severity, then what it costs, then how sure it is."""
    points, shown = evidence.r_points, not evidence.hidden_points
    if evidence.claims:
        # The worse ear decides: points of two directions do not add up in either.
        points = max(points_of(claim) for claim in evidence.claims)
        shown = all(claim.facts.rated.known for claim in evidence.claims)
    severity = severity_of(points, evidence.at_least, evidence.at_most)
    known = 0.0 if math.isnan(points) else points
    rank = (SEVERITIES.index(severity), max(known, evidence.gravity), -one.tier, evidence.confidence_pct)
    limit = _limit(one, case.profile) if math.isnan(evidence.limit) else evidence.limit
    basis = PROFILE if one.name in case.profile.limits else evidence.basis or one.basis
    return rank, Finding(
        finding=one.name,
        call=case.call.id,
        stream=evidence.stream,
        severity=severity,
        r_points=points if shown else math.nan,
        from_s=evidence.from_s,
        to_s=evidence.to_s,
        where=evidence.where,
        measured=evidence.measured,
        limit=limit,
        unit=one.unit,
        basis=basis,
        confidence_pct=evidence.confidence_pct,
        says=evidence.says,
        check_next=evidence.check_next or one.check_next,
    )
