"""Sums over counted samples, and the statistics of the gaps between updates, for every lane."""

from __future__ import annotations

from typing import Any

import numpy as np

from auditor.arrays import FloatArray
from auditor.kernels.jit import compiled

# rows of the result
UPDATES, SQUARES, ABSOLUTES, LARGEST, OUTSIDE_BAND, OUTSIDE_LIMITS = 0, 1, 2, 3, 4, 5
TRAVEL, SATURATED, MIN_GAP, MEDIAN_GAP, MAX_GAP, PEAK, SAMPLES = 6, 7, 8, 9, 10, 11, 12
ROWS = 13


@compiled
def add_errors(
    y: FloatArray, u: FloatArray, r: FloatArray, start: int, stop: int, bounds: FloatArray, total: FloatArray
) -> None:
    """Add samples start…stop−1; `bounds` is (band, low, high, actuator low, actuator high, tolerance)."""
    band, low, high, bottom, top, near = bounds[0], bounds[1], bounds[2], bounds[3], bounds[4], bounds[5]
    for k in range(start, stop):
        for lane in range(y.shape[1]):
            e = abs(r[k] - y[k, lane])
            total[SQUARES, lane] += e * e
            total[ABSOLUTES, lane] += e
            total[LARGEST, lane] = max(total[LARGEST, lane], e)
            total[OUTSIDE_BAND, lane] += 1.0 if e > band else 0.0
            total[OUTSIDE_LIMITS, lane] += 1.0 if (y[k, lane] < low or y[k, lane] > high) else 0.0
            total[SATURATED, lane] += 1.0 if (u[k, lane] <= bottom + near or u[k, lane] >= top - near) else 0.0
            total[SAMPLES, lane] += 1.0
        if k > start:
            for lane in range(y.shape[1]):
                total[TRAVEL, lane] += abs(u[k, lane] - u[k - 1, lane])


@compiled
def gaps_of_lane(
    updated: Any, lane: int, starts: Any, stops: Any, window: int, gaps: FloatArray, total: FloatArray
) -> None:
    """Updates, gaps that begin and end inside one counted stretch, and the busiest window of one lane."""
    found = 0
    updates = 0
    peak = 0
    for s in range(len(starts)):
        last = -1
        inside = 0
        for k in range(starts[s], stops[s]):
            if k - window >= starts[s] and updated[k - window, lane] == 1:
                inside -= 1
            if updated[k, lane] == 1:
                updates += 1
                inside += 1
                if last >= 0:
                    gaps[found] = k - last
                    found += 1
                last = k
            peak = max(peak, inside)
    total[UPDATES, lane] = updates
    total[PEAK, lane] = peak
    if found > 0:
        ordered = gaps[:found]
        total[MIN_GAP, lane] = ordered.min()
        total[MEDIAN_GAP, lane] = np.median(ordered)
        total[MAX_GAP, lane] = ordered.max()


@compiled
def summarise(
    y: FloatArray, u: FloatArray, updated: Any, r: FloatArray, starts: Any, stops: Any, bounds: FloatArray, window: int
) -> FloatArray:
    """Return (ROWS, lanes): sums in samples, gaps in samples (NaN where a lane has no gap)."""
    total = np.zeros((ROWS, y.shape[1]))
    total[MIN_GAP : MAX_GAP + 1, :] = np.nan
    longest = 1
    for s in range(len(starts)):
        add_errors(y, u, r, starts[s], stops[s], bounds, total)
        longest += stops[s] - starts[s]
    gaps = np.empty(longest)
    for lane in range(y.shape[1]):
        gaps_of_lane(updated, lane, starts, stops, window, gaps, total)
    return total
