"""A continuous plant behind a zero-order hold with fractional delay, as a difference equation.

The time unit is one base period. Two families: a chain of m equal lags T/m and one lag 1/p,
``G = kv (1 + z s) e^{-theta s} / ((s + p)(T/m s + 1)^m)``, and an oscillator
``G = kv w0 e^{-theta s} / (s² + 2 zeta w0 s + w0²)``. With q the backward shift the sampled plant is
``q^{d+1} b(q) / a(q)``; a load at its input, not delayed, reaches y through ``load(q) / a(q)``, up to whole samples.

The hold is exact: matrix exponentials of the plant with its input as one more state (Van Loan, IEEE TAC 23
(1978) 395).
"""

from __future__ import annotations

import math

import numpy as np

from auditor.arrays import FloatArray
from auditor.kernels import points
from auditor.kernels.jit import compiled

_TAYLOR_TERMS = 12


@compiled
def multiply(left: FloatArray, right: FloatArray, lower: bool, out: FloatArray) -> None:
    """``out = left @ right`` for small square matrices, `lower` when both are lower triangular."""
    n = len(left)
    for i in range(n):
        for j in range(n):
            out[i, j] = 0.0
        for k in range(i + 1 if lower else n):
            factor = left[i, k]
            for j in range(k + 1 if lower else n):
                out[i, j] += factor * right[k, j]


@compiled
def halvings_needed(M: FloatArray, t: float) -> int:
    """How often M t is halved until its largest row sum is at most 1/2."""
    norm = 0.0
    for i in range(len(M)):
        row = 0.0
        for j in range(len(M)):
            row += abs(M[i, j]) * t
        norm = max(norm, row)
    halvings = 0
    while norm > 0.5:
        norm *= 0.5
        halvings += 1
    return halvings


@compiled
def exponential(M: FloatArray, t: float, lower: bool) -> FloatArray:
    """e^{M t} of a small matrix by scaling, a Taylor polynomial in Horner's form, and squaring."""
    n = len(M)
    halvings = halvings_needed(M, t)
    X = np.empty((n, n))
    E = np.zeros((n, n))
    spare = np.empty((n, n))
    for i in range(n):
        E[i, i] = 1.0
        for j in range(n):
            X[i, j] = M[i, j] * t / 2.0**halvings
    for k in range(_TAYLOR_TERMS, 0, -1):
        multiply(X, E, lower, spare)
        for i in range(n):
            for j in range(n):
                E[i, j] = spare[i, j] / k
            E[i, i] += 1.0
    for _ in range(halvings):
        multiply(E, E, lower, spare)
        E, spare = spare, E
    return E


@compiled
def zero_of(coordinate: float) -> float:
    """Time constant of the zero, 0 inside the dead zone."""
    if coordinate > points.ZERO_DEAD_ZONE:
        return coordinate - points.ZERO_DEAD_ZONE
    if coordinate < -points.ZERO_DEAD_ZONE:
        return coordinate + points.ZERO_DEAD_ZONE
    return 0.0


@compiled
def chain(x: FloatArray, m: int) -> tuple[FloatArray, FloatArray]:
    """Lag chain behind its input: matrix (m + 2, m + 2), input first, hence lower triangular; output row."""
    n = m + 2
    p = math.exp(x[points.LN_POLE])
    rate = m / math.exp(x[points.LN_LAGS])
    M = np.zeros((n, n))
    for i in range(1, m + 1):
        M[i, i] = -rate
        M[i, i - 1] = rate
    M[m + 1, m + 1] = -p
    M[m + 1, m] = 1.0
    C = np.zeros(n)
    gain = math.exp(x[points.LN_GAIN])
    z = zero_of(x[points.ZERO]) if m > 0 else 0.0
    C[m + 1] = gain * (1.0 - z * p)
    if m > 0:
        C[m] = gain * z
    return M, C


@compiled
def oscillator(x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Oscillator behind its input: matrix (3, 3), input first; output row."""
    w0 = math.exp(-x[points.LN_LAGS])
    zeta = math.exp(x[points.LN_POLE])
    M = np.zeros((3, 3))
    M[1, 2] = 1.0
    M[2, 1] = -w0 * w0
    M[2, 2] = -2.0 * zeta * w0
    M[2, 0] = w0
    C = np.zeros(3)
    C[1] = math.exp(x[points.LN_GAIN])
    return M, C


@compiled
def denominator(x: FloatArray, m: int, E: FloatArray) -> FloatArray:
    """a(q): the sampled poles are known for a chain; for the oscillator trace and determinant of its own part."""
    if m == points.OSCILLATOR:
        a = np.zeros(3)
        a[0] = 1.0
        a[1] = -(E[1, 1] + E[2, 2])
        a[2] = E[1, 1] * E[2, 2] - E[1, 2] * E[2, 1]
        return a
    a = np.zeros(m + 2)
    a[0] = 1.0
    pole = math.exp(-math.exp(x[points.LN_POLE]))
    for i in range(m + 1):
        for j in range(i + 1, 0, -1):
            a[j] -= pole * a[j - 1]
        pole = math.exp(-m / math.exp(x[points.LN_LAGS]))
    return a


@compiled
def numerator(a: FloatArray, E: FloatArray, C: FloatArray, first: FloatArray, second: FloatArray) -> FloatArray:
    """b(q) = a(q) times the response to one pulse: state f, one period later E f + `second`, then free.

    f is the first column of `first`. The input's own place in the states (index 0) is not used: it is zero after the
    pulse.
    """
    n = len(C)
    state = np.zeros(n)
    following = np.zeros(n)
    b = np.zeros(n)
    for i in range(1, n):
        state[i] = first[i, 0]
    for lag in range(n):
        response = 0.0
        for i in range(1, n):
            response += C[i] * state[i]
        for j in range(n - lag):
            b[lag + j] += a[j] * response
        for i in range(1, n):
            following[i] = second[i] if lag == 0 else 0.0
            for j in range(1, n):
                following[i] += E[i, j] * state[j]
        for i in range(1, n):
            state[i] = following[i]
    return b


@compiled
def difference_equation(x: FloatArray, m: int) -> tuple[int, FloatArray, FloatArray, FloatArray]:
    """Return d, a(q), b(q) and load(q) of the plant at `x` with structure m; all three have the same length."""
    lower = m != points.OSCILLATOR
    M, C = chain(x, m) if lower else oscillator(x)
    n = len(C)
    d = math.floor(x[points.DELAY])
    f = x[points.DELAY] - d
    early = exponential(M, f, lower)
    late = exponential(M, 1.0 - f, lower)
    whole = np.empty((n, n))
    multiply(late, early, lower, whole)
    # What enters during the first f of the period is carried on to its end.
    carried = np.zeros(n)
    for i in range(1, n):
        for j in range(1, n):
            carried[i] += late[i, j] * early[j, 0]
    a = denominator(x, m, whole)
    b = numerator(a, whole, C, late, carried)
    load = numerator(a, whole, C, whole, np.zeros(n))
    return d, a, b, load
