"""What a rule is: a cause under its name, with limit, source and words; and the catalogue of all of them.

A rule looks at one call and yields ``Evidence``, of which ``diagnose`` makes ``Finding`` rows. What stands beside the
rule in its decorator is also its page in `rtpaudit explain` and in the documents, so that the two cannot differ.
"""

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    from rtpaudit.findings.case import Case
    from rtpaudit.findings.share import Claim

NAN = float("nan")

Severity = Literal["remark", "concern", "fault"]
SEVERITIES: tuple[Severity, ...] = ("remark", "concern", "fault")

BEFORE, AFTER, ENDPOINT, CAPTURE, UNKNOWN = (
    "before capture point",
    "after capture point",
    "endpoint",
    "capture",
    "unknown",
)
PLACES = (BEFORE, AFTER, ENDPOINT, CAPTURE, UNKNOWN)

COMMON_PRACTICE, PROFILE = "common practice", "profile"

GROUPS = ("network", "endpoint", "call", "sound", "capture")


@dataclass(frozen=True, slots=True)
class Finding:
    """A cause with its evidence. Each attribute is a column of the findings table; NaN or "" where there is none."""

    finding: str
    call: str
    stream: str
    severity: str
    r_points: float
    from_s: float
    to_s: float
    where: str
    measured: float
    limit: float
    unit: str
    basis: str
    confidence_pct: float
    says: str
    check_next: str


@dataclass(slots=True)
class Evidence:
    """What a rule found once, before it is weighed against the others."""

    measured: float
    says: str
    """one sentence for the ticket: what was measured, what the listener heard, where"""
    stream: str = ""
    """id of the stream, "" where it concerns the call"""
    where: str = UNKNOWN
    confidence_pct: float = 90.0
    from_s: float = NAN
    """within the call; NaN where it is all of the stream or the call [s]"""
    to_s: float = NAN
    claims: list["Claim"] = field(default_factory=list)
    """packets of streams that this cause explains, for the rating without it"""
    r_points: float = NAN
    """what it costs, where that does not follow from its claims"""
    hidden_points: bool = False
    """whether the points only weigh the cause, as G.113 has no values for the encoding"""
    at_least: Severity = "remark"
    """the rule's own word, where the rating is blind or says too little"""
    at_most: Severity = "fault"
    """where the evidence is thin, or nobody can hear it"""
    gravity: float = 0.0
    """for the order of findings only: points that it would be worth to a listener where the rating is blind"""
    limit: float = NAN
    """the limit that held here, where it is not the rule's own"""
    basis: str = ""
    """likewise, "" for the rule's own"""
    check_next: str = ""
    """likewise"""


Judge = Callable[["Case", float], Iterator[Evidence]]


@dataclass(frozen=True, slots=True)
class Rule:
    """One entry of the catalogue: a cause, how it is told, and its page."""

    name: str
    group: str
    """one of ``GROUPS``"""
    tier: int
    """which rules explain packets first: those of a lower tier leave what they do not explain to the higher"""
    limit: float
    unit: str
    basis: str
    means: str
    measured_as: str
    severity: str
    """how grave it is, in words for its page"""
    check_next: str
    judge: Judge


CATALOGUE: dict[str, Rule] = {}
"""Every rule by its name, in the order in which people read them."""


def rule(
    name: str,
    *,
    group: str,
    limit: float,
    unit: str,
    basis: str,
    means: str,
    measured_as: str,
    severity: str = "",
    check_next: str,
    tier: int = 1,
) -> Callable[[Judge], Judge]:
    """Register a rule under the name of its finding; a profile may change the limit."""
    if name in CATALOGUE:
        raise ValueError(f"two rules are called {name}")
    if group not in GROUPS:
        raise ValueError(f"{name} is of no group {group!r}; there are {', '.join(GROUPS)}")

    def register(judge: Judge) -> Judge:
        CATALOGUE[name] = Rule(
            name, group, tier, limit, unit, basis, means, measured_as, severity or BY_POINTS, check_next, judge
        )
        return judge

    return register


BY_POINTS = "by what it takes from the rating: a remark below 1 point, a concern from 1, a fault from 5"
CONCERN_POINTS, FAULT_POINTS = 1.0, 5.0
"""half a band of ITU-T G.109 makes a fault (common practice)"""


def severity_of(points: float, at_least: Severity = "remark", at_most: Severity = "fault") -> Severity:
    """Severity by what a cause takes from the rating, within the rule's own word."""
    by_points = 0 if math.isnan(points) else int(points >= CONCERN_POINTS) + int(points >= FAULT_POINTS)
    return SEVERITIES[min(max(by_points, SEVERITIES.index(at_least)), SEVERITIES.index(at_most))]
