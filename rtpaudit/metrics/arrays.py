"""Columns as the compiled loops need them: one type and layout each, so that every loop is compiled once."""

from typing import Any

import numpy as np
from numpy.typing import DTypeLike, NDArray


def column(values: Any, dtype: DTypeLike, length: int | None = None) -> NDArray[Any]:
    """Values as a contiguous array of one dimension, copied only where type or layout differ.

    Parameters
    ----------
    values : array_like, shape (n,)
    dtype : dtype
    length : int, optional
        Number of elements that the other columns of the stream have; a single number is repeated so often.

    Raises
    ------
    ValueError
        If there is more than one dimension, or another length than the other columns have.
    """
    found = np.ascontiguousarray(values, dtype)
    if length is not None and np.ndim(values) == 0:
        return np.full(length, found.reshape(-1)[0], dtype)
    if found.ndim != 1:
        raise ValueError(f"a column has one dimension, this one has {found.ndim}")
    if length is not None and len(found) != length:
        raise ValueError(f"columns of one stream have one length, not {length} and {len(found)}")
    # A read-only or unaligned array (a view of a mapped file) would be another type to the compiler.
    return found if found.flags.writeable and found.flags.aligned else found.copy()
