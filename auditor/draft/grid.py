"""The candidate signals on an even clock, held through empty cells, NaN where nothing is known for long."""

from __future__ import annotations

import itertools

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray, read_only
from auditor.draft.stamps import NO_TIME

LONGEST_HOLD = 20
MOST_SAMPLES = 20_000


def even(ns: IntArray, numbers: FloatArray, starts: BoolArray, period: float) -> FloatArray:
    """Put the rows on a grid of `period`.

    Parameters
    ----------
    ns : ndarray of int64, shape (rows,)
    numbers : ndarray, shape (rows, m)
        NaN where a cell is empty.
    starts : ndarray of bool, shape (rows,)
        True at the first row of each part.
    period : float
        [s]

    Returns
    -------
    ndarray, shape (N, m)
        The parts behind each other with a row of NaN between them, at most `MOST_SAMPLES` samples of each part.
    """
    bounds = [*np.flatnonzero(starts), len(ns)]
    parts = [_part(ns[a:b], numbers[a:b], period) for a, b in itertools.pairwise(bounds)]
    gap = np.full((1, numbers.shape[1]), np.nan)
    return read_only(np.concatenate([piece for part in parts for piece in (part, gap)]))


def _part(ns: IntArray, numbers: FloatArray, period: float) -> FloatArray:
    known = ns != NO_TIME
    ns, numbers = ns[known], numbers[known]
    if not len(ns):
        return np.empty((0, numbers.shape[1]))
    order = np.argsort(ns, kind="stable")
    slot = np.rint((ns[order] - ns[order[0]]) / (1e9 * period)).astype(np.int64)
    inside = slot < MOST_SAMPLES
    slot, rows = slot[inside], numbers[order[inside]]
    grid = np.full((int(slot[-1]) + 1, numbers.shape[1]), np.nan)
    for column in range(grid.shape[1]):
        there = np.isfinite(rows[:, column])
        grid[slot[there], column] = rows[there, column]
        grid[:, column] = _hold(grid[:, column])
    return grid


def _hold(values: FloatArray) -> FloatArray:
    last = np.maximum.accumulate(np.where(np.isfinite(values), np.arange(len(values)), -1))
    age = np.arange(len(values)) - last
    return np.where((last >= 0) & (age <= LONGEST_HOLD), values[np.maximum(last, 0)], np.nan)
