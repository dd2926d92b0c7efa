"""The quality budget: the way from Ro down to R, one step a cause, which adds up exactly."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from rtpaudit.emodel.g107 import Parts, Values, on_grid

STEPS = ("Ro", "Is", "Idte", "Idle", "Idd", "Ie", "loss", "discards", "A")
"""The steps in the order in which they are told."""


@dataclass(frozen=True, slots=True)
class Budget:
    """Signed points of each step: Ro and A raise the rating, the others lower it. All arrays have one shape."""

    Ro: Values
    Is: Values
    Idte: Values
    Idle: Values
    Idd: Values
    Ie: Values
    loss: Values
    """packets that the network lost: their share of Ie,eff - Ie"""
    discards: Values
    """packets that came too late for the playout buffer: theirs"""
    A: Values
    R: Values
    """what the steps add up to, to the last bit and in any order"""

    def steps(self) -> tuple[tuple[str, Values], ...]:
        """Name and points of each step, in order."""
        return tuple((name, getattr(self, name)) for name in STEPS)


def budget(parts: Parts, lost: ArrayLike = 0, discarded: ArrayLike = 0) -> Budget:
    """Steps from Ro down to R.

    Parameters
    ----------
    parts : Parts
        A rating, of any shape.
    lost, discarded : int or array
        Packets lost, and packets discarded at the playout buffer; what they cost is shared in proportion. Where
        both are 0 but the rating holds a loss, which the profile then planned, it counts as loss. [packets]

    Returns
    -------
    Budget
        Arrays in the common shape of ``parts`` and the counts.

    References
    ----------
    ITU-T G.107 (06/2015), 7.1 and 7.5; the sharing of Ie,eff is our own.
    """
    lost, discarded = np.asarray(lost, np.float64), np.asarray(discarded, np.float64)
    gone = lost + discarded
    by_loss = np.where(gone > 0, lost / np.where(gone > 0, gone, 1.0), 1.0)
    cost = parts.Ie_eff - parts.Ie
    loss = on_grid(cost * by_loss)
    steps = {
        "Ro": parts.Ro,
        "Is": -parts.Is,
        "Idte": -parts.Idte,
        "Idle": -parts.Idle,
        "Idd": -parts.Idd,
        "Ie": -parts.Ie,
        "loss": -loss,
        "discards": loss - cost,
        "A": parts.A,
        "R": parts.R,
    }
    # A step that costs nothing is 0, never -0, which a page would print with its sign.
    shape = np.broadcast_shapes(loss.shape, parts.R.shape)
    return Budget(**{name: np.broadcast_to(step + 0.0, shape) for name, step in steps.items()})


def blended(budgets: list[Budget], weights: ArrayLike) -> Budget:
    """One budget for several that share a direction, such as the streams that followed each other in a call.

    Parameters
    ----------
    budgets : list of Budget
        At least one, all of one shape.
    weights : array, shape (budgets,)
        Of each, such as its expected packets; not all 0. [packets]

    Returns
    -------
    Budget
        Each step is the weighted mean; R is their exact sum, within 3e-9 of the weighted mean of R.

    Raises
    ------
    ValueError
        If there is no budget, or the weights do not fit or add up to nothing.
    """
    weights = np.asarray(weights, np.float64)
    if not budgets or weights.shape != (len(budgets),) or not weights.sum() > 0:
        raise ValueError("a blend needs at least one budget, one weight for each, and not all of them 0")
    share = weights / weights.sum()
    steps = {
        name: on_grid(sum(part * getattr(one, name) for part, one in zip(share, budgets, strict=True)))
        for name in STEPS
    }
    return Budget(**steps, R=np.asarray(sum(steps.values())))
