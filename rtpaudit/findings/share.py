"""Packets shared out among causes, and what each takes from the rating: it is taken away, and the rest rated again.

Causes of a low tier explain packets first. What they are not sure of is left to the next tier; where causes of one
tier explain the same packet, each has a share of it.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rtpaudit.findings.facts import Gone, StreamFacts
from rtpaudit.units import percent

Weights = NDArray[np.float64]


@dataclass(slots=True, eq=False)
class Claim:
    """Packets of one stream that a cause explains."""

    facts: StreamFacts
    weight: Weights
    """how sure it is of each item of ``facts.gone``, 0 to 1; once shared out, its share. Shape (items,)"""
    wanted: float = field(init=False)
    """packets that it explains before they are shared out"""

    def __post_init__(self) -> None:
        self.wanted = self.packets

    @property
    def packets(self) -> float:
        """Packets that it explains, each by how sure it is."""
        return float((self.weight * self.facts.gone.packets).sum())


def claim(facts: StreamFacts, items: NDArray[np.int64], sure: float = 1.0) -> Claim:
    """A claim on some items of what is gone, all equally sure."""
    weight = np.zeros(len(facts.gone))
    weight[items] = sure
    return Claim(facts, weight)


def settle(claims: Sequence[Claim], left: Weights) -> Weights:
    """Turn the weights of one tier's claims on one stream into shares of what is ``left``; what they leave comes back.

    Where several claim the same packet, its share goes to them in proportion, and the surest says how much is left.
    """
    if not claims:
        return left
    wanted = np.sum([one.weight for one in claims], axis=0)
    taken = np.max([one.weight for one in claims], axis=0)
    scale = left * taken / np.where(wanted > 0, wanted, 1.0)
    for one in claims:
        one.weight = one.weight * scale
    return np.asarray(left * (1.0 - taken))


def points_of(one: Claim) -> float:
    """What the claimed packets take from the rating of their stream. [R points]

    A packet that is claimed in part is taken away as a whole, and its part of the difference counts.
    """
    facts, gone = one.facts, one.facts.gone
    claimed = one.weight > 0
    if not claimed.any():
        return 0.0
    whole = float(gone.packets[claimed].sum())
    expected = facts.sequence.expected
    with_it = facts.rated.R(*loss_without(gone, np.zeros(len(gone), np.bool_), expected))
    without_it = facts.rated.R(*loss_without(gone, claimed, expected))
    # Without single losses those that are left are burstier, which may weigh more: then the cause costs nothing.
    return max(0.0, without_it - with_it) * one.packets / whole


def loss_without(gone: Gone, taken_away: NDArray[np.bool_], expected: int) -> tuple[float, float]:
    """Share of packets gone [%] and burst ratio once some items are taken away."""
    place, packets = gone.place[~taken_away], gone.packets[~taken_away]
    lost = int(packets.sum())
    if lost in (0, expected):
        return percent(lost, expected), float("nan")
    runs = 1 + int((place[1:] > place[:-1] + packets[:-1]).sum())
    return percent(lost, expected), lost / runs * (1.0 - lost / expected)
