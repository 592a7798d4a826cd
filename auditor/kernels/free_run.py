"""A sampled plant driven by its input alone (method, equation 2.1 with δ = u)."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray
from auditor.kernels.jit import compiled


@compiled
def free_run(
    A: FloatArray, B0: FloatArray, B1: FloatArray, C: FloatArray, delay: int, u: FloatArray, y: FloatArray
) -> None:
    """Write into `y` the response to `u` from rest; u is zero before the first sample."""
    n = len(C)
    x = np.zeros(n)
    following = np.zeros(n)
    for k in range(len(u)):
        y[k] = 0.0
        late = u[k - delay] if k >= delay else 0.0
        early = u[k - delay - 1] if k > delay else 0.0
        for i in range(n):
            y[k] += C[i] * x[i]
            following[i] = B0[i] * late + B1[i] * early
            for j in range(n):
                following[i] += A[i, j] * x[j]
        x[:] = following
