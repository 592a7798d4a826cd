"""Runs of True in a mask, and holding a value along the grid: what every check and the alignment share."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray

FORMATIVE_SAMPLE = 200_000
"""Values looked at where a rough scale of a signal is all that is needed."""


def runs_of(mask: BoolArray) -> tuple[IntArray, IntArray]:
    """Return the starts and the stops (one past the end) of the runs of True in `mask`, in order."""
    padded = np.zeros(len(mask) + 2, dtype=np.int8)
    padded[1:-1] = mask
    edges = np.flatnonzero(np.diff(padded))
    return edges[0::2], edges[1::2]


def latest(mask: BoolArray) -> IntArray:
    """Return, for every place, the index of the last True at or before it, −1 where there is none."""
    index: IntArray = np.where(mask, np.arange(len(mask)), -1)
    return np.asarray(np.maximum.accumulate(index)) if len(mask) else index


def hold(values: FloatArray, longest: int | None = None, broken: BoolArray | None = None) -> FloatArray:
    """Hold every finite value until the next one.

    Parameters
    ----------
    values : ndarray, shape (N,)
        NaN where nothing is there.
    longest : int or None
        Samples a value lasts, its own included; None for no limit.
    broken : ndarray of bool, shape (N,), or None
        True where a value is known to be bad, so that the one before it ends there.

    Returns
    -------
    ndarray, shape (N,)
        NaN before the first value and where no value lasts.
    """
    there = np.isfinite(values)
    if len(values) == 0 or there.all() or longest == 1:
        return values
    source = latest(there)
    lasts = source >= 0
    if longest is not None:
        lasts &= np.arange(len(values)) - source < longest
    if broken is not None:
        lasts &= source >= latest(broken & ~there)
    return np.where(lasts, values[source], np.nan)


def thinned(values: npt.NDArray[Any], most: int = FORMATIVE_SAMPLE) -> npt.NDArray[Any]:
    """Return every n-th value, n the smallest odd stride that leaves at most `most` of them.

    An odd stride sees both kinds of rows where two kinds alternate.
    """
    return values[:: max(1, -(-len(values) // most)) | 1]
