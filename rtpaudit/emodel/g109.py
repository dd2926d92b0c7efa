"""Words for bands of R (ITU-T G.109)."""

from typing import overload

import numpy as np
from numpy.typing import NDArray

# Lower edge of each band. ITU-T G.109 (09/1999), Table 1; the words are from memory, the edges were read.
EDGES = (50.0, 60.0, 70.0, 80.0, 90.0)
BANDS = ("not recommended", "poor", "low", "medium", "high", "best")

_WORDS = np.array([*BANDS, ""])


@overload
def quality_band(R: float) -> str: ...
@overload
def quality_band(R: NDArray[np.float64]) -> NDArray[np.str_]: ...
def quality_band(R: float | NDArray[np.float64]) -> str | NDArray[np.str_]:
    """Word for the band that a rating lies in.

    Parameters
    ----------
    R : float or array
        Rating factor, not rounded: 89.99 is still below 90. [no unit]

    Returns
    -------
    str or array of str, shape of ``R``
        One of ``BANDS``; "" where R is NaN.

    References
    ----------
    ITU-T G.109 (09/1999), Table 1.
    """
    words = _WORDS[np.where(np.isnan(R), len(BANDS), np.digitize(R, EDGES))]
    return words if isinstance(R, np.ndarray) else str(words)
