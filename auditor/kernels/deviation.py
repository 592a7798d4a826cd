"""The plant's answer to the difference between replayed and recorded actuator, over lanes (method, equation 2.1).

Letters: A, B0, B1 of the sampled plants, dx the deviation state, δ the actuator's deviation, d whole samples of delay.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.kernels.jit import compiled


@compiled
def recall(past: FloatArray, t: int, delay: IntArray, acting: FloatArray) -> None:
    """Fetch δ[k−d] and δ[k−d−1] of every lane; `past` has a power of two of slots, so that a mask wraps around."""
    mask = past.shape[0] - 1
    for lane in range(past.shape[1]):
        late = t - delay[lane]
        acting[0, lane] = past[np.uint64(late & mask), lane]
        acting[1, lane] = past[np.uint64((late - 1) & mask), lane]


@compiled
def occupied(A: FloatArray) -> Any:
    """1 where any lane has a non-zero entry, shape (n, n): chains of lags are triangular, and zeros need no work."""
    n = A.shape[0]
    used = np.zeros((n, n), dtype=np.uint8)
    for i in range(n):
        for j in range(n):
            for lane in range(A.shape[2]):
                used[i, j] = 1 if A[i, j, lane] != 0.0 else used[i, j]
    return used


@compiled
def advance(
    used: Any, A: FloatArray, B0: FloatArray, B1: FloatArray, acting: FloatArray, dx: FloatArray, following: FloatArray
) -> None:
    """dx⁺ = A dx + B0 δ[k−d] + B1 δ[k−d−1] (2.1); δ is zero before the span."""
    n, lanes = dx.shape
    for i in range(n):
        first = used[i, 0] == 1
        for lane in range(lanes):
            driven = B0[i, lane] * acting[0, lane] + B1[i, lane] * acting[1, lane]
            following[i, lane] = driven + A[i, 0, lane] * dx[0, lane] if first else driven
        for j in range(1, n):
            if used[i, j] == 1:
                for lane in range(lanes):
                    following[i, lane] += A[i, j, lane] * dx[j, lane]
    for i in range(n):
        for lane in range(lanes):
            dx[i, lane] = following[i, lane]


@compiled
def leading_zeros(column: IntArray) -> int:
    """Number of lanes before the first that is perturbed."""
    for lane in range(len(column)):
        if column[lane] != 0:
            return lane
    return len(column)
