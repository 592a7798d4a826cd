"""How well a control law would explain one signal by others.

For an actuator candidate u and an error e, the increments over s samples of a PI or PID law are linear in the error's
increments and its sum,

    u_k − u_{k−s} = K (e_k − e_{k−s}) + K' (e_{k−1} − e_{k−1−s}) + (K h / Ti) Σ_{j=k−s+1…k} e_j + b,

K' taking up the derivative, the way of integrating and a clock skew of one sample, b an unknown constant setpoint.
Short strides tell a controller (which answers within the sample) from a process (which cannot); long strides still see
the law where u is rounded. All of it needs covariances only, so that every choice of roles costs a 3 × 3 solution.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray

STRIDES = (1, 8, 32)
LEAST_WINDOWS = 40


@dataclass(frozen=True, eq=False, slots=True)
class Moments:
    """Covariances, shape (3 m, 3 m), of the features of m signals over one stride; features: D, lagged D, sum."""

    covariance: FloatArray
    windows: int

    def explained(self, u: int, y: int, r: int | None) -> float:
        """Return the share of the variance of u's increments that the law explains; r None is a constant setpoint."""
        m = self.covariance.shape[0] // 3
        total = self.covariance[u, u]
        if self.windows < LEAST_WINDOWS or total <= 0:
            return 0.0
        pick = np.zeros((3, 3 * m))
        for feature in range(3):
            pick[feature, feature * m + y] = -1.0
            if r is not None:
                pick[feature, feature * m + r] = 1.0
        inner = pick @ self.covariance @ pick.T
        cross = pick @ self.covariance[:, u]
        size = np.sqrt(np.maximum(np.diag(inner), 1e-300))
        solution = np.linalg.lstsq(inner / np.outer(size, size), cross / size, rcond=1e-10)[0]
        return float(np.clip(solution @ (cross / size) / total, 0.0, 1.0))


def moments(grid: FloatArray, use: BoolArray, stride: int) -> Moments:
    """Return the moments over all windows of `stride` samples in which every signal is known.

    Parameters
    ----------
    grid : ndarray, shape (N, m)
    use : ndarray of bool, shape (N,)
        False where a window may not begin or end, such as with the actuator at a limit.
    stride : int
    """
    known = np.asarray(np.isfinite(grid).all(axis=1))
    filled = np.where(known[:, None], grid - np.nanmean(grid, axis=0), 0.0)
    sums = np.concatenate([np.zeros((1, grid.shape[1])), np.cumsum(filled, axis=0)])
    count = np.concatenate([[0], np.cumsum(known)])
    k = np.arange(stride + 1, len(grid))
    whole = (count[k + 1] - count[k - stride - 1] == stride + 2) & use[k] & use[k - stride]
    k = k[whole]
    features = np.hstack(
        [
            filled[k] - filled[k - stride],
            filled[k - 1] - filled[k - 1 - stride],
            sums[k + 1] - sums[k + 1 - stride],
        ]
    )
    if len(k) < LEAST_WINDOWS:
        return Moments(np.zeros((3 * grid.shape[1],) * 2), 0)
    return Moments(np.atleast_2d(np.cov(features, rowvar=False)), len(k))


def at_limit(values: FloatArray) -> BoolArray:
    """Return True where a signal stands at its own smallest or largest value, if it stands there often; shape (N,)."""
    limits = np.zeros(len(values), dtype=np.bool_)
    for limit in extremes(values):
        limits |= values == limit
    return limits


def extremes(values: FloatArray) -> Sequence[float]:
    """Return the smallest and the largest value where the signal stands at them for at least 1 % of the time."""
    known = values[np.isfinite(values)]
    if not len(known) or known.min() == known.max():
        return ()
    return [float(end) for end in (known.min(), known.max()) if np.mean(known == end) >= 0.01]
