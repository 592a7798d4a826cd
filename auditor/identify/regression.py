"""The controller's equation as a regression on the record.

Letters: e error, y measurement, r setpoint, u actuator, k sample, h base period. With S the running sum of e and x the
filtered derivative signal, ``x[k] = a x[k−1] + s[k] − s[k−1]``, a = Tf/(Tf + h), the controller is

    u[k + lag] = constant + K e[k] + Ki S[k] + g x[k] + w r[k]        levels, one constant per unbroken stretch
    u[k + lag] − u[k + lag − 1] = the differences of the right side    differences

K is the gain of the backward form, Ki = K h / Ti, g = K Td / (Tf + h), w = K (β − 1). The forward and the trapezoid
form are the same equation with K + Ki and K + Ki / 2 in place of K. Declared disturbances may enter
like r: feedforward.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from scipy.signal import lfilter

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.identify.signals import Signals

PASSES = 30
"""Reweightings of the least-absolute fit."""

_FLOATING = 1e-9
"""Relative residual of floating point: differences of neighbours lose some of u's 16 digits."""

_SETTLED = 1e-9
"""What may be left of the unknown derivative state at the beginning of a span before its rows are used."""


_Flags = TypeVar("_Flags", BoolArray, IntArray)


@dataclass(frozen=True, slots=True, kw_only=True)
class Terms:
    """What a candidate controller is made of.

    `derivative` is "measurement", "error" or None, `pole` its a; `feedforward` counts declared disturbances.
    """

    integral: bool = False
    derivative: str | None = None
    weight: bool = False
    feedforward: int = 0
    pole: float = 0.0

    @property
    def count(self) -> int:
        """Coefficients, the pole included."""
        return 1 + self.integral + 2 * (self.derivative is not None) + self.weight + self.feedforward

    @property
    def kind(self) -> str:
        """Name people use."""
        return ("PI" if self.integral else "P") + ("D" if self.derivative else "")


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Design:
    """One regression: columns (n, p) in the order K, Ki, g, w, feedforward; target and stretch (n,).

    `stretch` numbers the unbroken stretches, each with its own constant; None for differences.
    """

    columns: FloatArray
    target: FloatArray
    stretch: IntArray | None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Fit:
    """What one regression found.

    Attributes
    ----------
    coefficients : ndarray, shape (p,)
    residual : ndarray, shape (n,)
    scale, relative : float
        Scale of the residual (rms, or mean absolute value when robust), and that over the target's.
    robust, exact : bool
        `exact` when floating point is all that is left; of a robust fit, on most rows that move.
    """

    coefficients: FloatArray
    residual: FloatArray
    scale: float
    relative: float
    robust: bool
    exact: bool = False

    @property
    def rows(self) -> int:
        """Number of rows used."""
        return len(self.residual)


def derivative_state(signals: Signals, terms: Terms) -> FloatArray:
    """x of every sample, zero at the beginning of each span, shape (N,)."""
    s = signals.e if terms.derivative == "error" else -signals.y
    x = np.zeros(len(s))
    for start, stop in _spans(signals.age):
        x[start:stop] = lfilter([1.0], [1.0, -terms.pole], np.diff(s[start:stop], prepend=s[start]))
    return x


def difference_rows(signals: Signals, lag: int, terms: Terms) -> IntArray:
    """Samples k whose equation in differences holds: neither actuator sample at a limit, all inside one span."""
    now, before = _shifted(signals.moving, lag), _shifted(signals.moving, lag - 1)
    oldest = max(1, 1 - lag) + _settling(signals, terms)
    same = _shifted(signals.age, lag) - signals.age == lag
    return np.flatnonzero(
        now & before & same & _shifted(signals.good, 0) & _shifted(signals.good, -1) & (signals.age >= oldest)
    )


def level_rows(signals: Signals, lag: int, terms: Terms) -> IntArray:
    """Samples k whose equation in levels holds."""
    same = _shifted(signals.age, lag) - signals.age == lag
    usable = _shifted(signals.moving, lag) & signals.good & same
    return np.flatnonzero(usable & (signals.age >= _settling(signals, terms)))


def difference_design(signals: Signals, lag: int, terms: Terms, rows: IntArray) -> Design:
    """Lay out the regression in differences."""
    step = [signals.e[rows] - signals.e[rows - 1]]
    if terms.integral:
        step.append(signals.e[rows])
    if terms.derivative is not None:
        x = derivative_state(signals, terms)
        step.append(x[rows] - x[rows - 1])
    if terms.weight:
        step.append(signals.r[rows] - signals.r[rows - 1])
    step += [w[rows] - w[rows - 1] for w in signals.w[: terms.feedforward]]
    target = signals.u[rows + lag] - signals.u[rows + lag - 1]
    return Design(columns=np.stack(step, axis=1), target=target, stretch=None)


def level_design(signals: Signals, lag: int, terms: Terms, rows: IntArray) -> Design:
    """Lay out the regression in levels; anti-windup moves the integral, so a limit ends a stretch."""
    level = [signals.e]
    if terms.integral:
        level.append(np.cumsum(signals.e))
    if terms.derivative is not None:
        level.append(derivative_state(signals, terms))
    if terms.weight:
        level.append(signals.r)
    level += list(signals.w[: terms.feedforward])
    broken = ~_shifted(signals.free, lag) | ~signals.good | (signals.age == 0)
    stretch = np.unique(np.cumsum(broken)[rows], return_inverse=True)[1].astype(np.int64)
    columns = np.stack([x[rows] for x in level], axis=1)
    return Design(columns=columns, target=signals.u[rows + lag], stretch=stretch)


def solve(design: Design, robust: bool, passes: int = PASSES) -> Fit:
    """Fit by least squares, or by least absolute residuals where rare rows obey another law."""
    weights = np.ones(len(design.target))
    if len(weights) == 0:
        nothing = np.zeros(design.columns.shape[1])
        return Fit(coefficients=nothing, residual=weights, scale=math.inf, relative=math.inf, robust=robust)
    coefficients = _weighted(design, weights)
    residual = residual_of(design, coefficients, weights)
    for _ in range(passes if robust else 0):
        before = coefficients
        weights = _inverse_size(residual, float(np.max(np.abs(design.target))))
        coefficients = _weighted(design, weights)
        residual = residual_of(design, coefficients, weights)
        if np.all(np.abs(coefficients - before) <= 1e-14 * np.abs(before)):
            break
    return measured(design, coefficients, residual, robust)


def _inverse_size(residual: FloatArray, largest: float) -> FloatArray:
    """Weights that turn squares into absolute values; rows that fit to floating point do not outweigh all others."""
    size = np.abs(residual)
    floor = max(1e-12 * float(np.mean(size)), 1e-14 * largest, np.finfo(float).tiny)
    weights = 1.0 / np.maximum(size, floor)
    return np.asarray(weights / np.max(weights))


def measured(design: Design, coefficients: FloatArray, residual: FloatArray, robust: bool) -> Fit:
    """Compare a residual with the actuator's own movement."""
    whole = residual_of(design, np.zeros(len(coefficients)), np.ones(len(residual)))
    scale, own = _scale(residual, robust), _scale(whole, robust)
    relative = scale / own if own > 0 else math.inf
    moving = np.abs(residual)[design.target != 0]
    mostly = robust and len(moving) > 0 and float(np.median(moving)) < _FLOATING * own
    return Fit(
        coefficients=coefficients,
        residual=residual,
        scale=scale,
        relative=relative,
        robust=robust,
        exact=relative < _FLOATING or mostly,
    )


def residual_of(design: Design, coefficients: FloatArray, weights: FloatArray) -> FloatArray:
    """Target less columns × coefficients, less the weighted mean of each stretch."""
    rest = design.target - design.columns @ coefficients
    return _centred(rest[:, None], design.stretch, weights)[:, 0]


def _weighted(design: Design, weights: FloatArray) -> FloatArray:
    """Solve the normal equations, then twice for what is left, which brings back the digits that squaring costs."""
    columns = _centred(design.columns, design.stretch, weights)
    rest = _centred(design.target[:, None], design.stretch, weights)[:, 0]
    size = np.sqrt(np.sum(weights[:, None] * columns**2, axis=0))
    size[size == 0] = 1.0
    columns = columns / size
    weighted = columns.T * weights
    inverse = np.linalg.pinv(weighted @ columns, rcond=1e-14, hermitian=True)
    total = np.zeros(len(size))
    for _ in range(3):
        step = inverse @ (weighted @ rest)
        total += step
        rest = rest - columns @ step
    return np.asarray(total / size)


def _centred(values: FloatArray, stretch: IntArray | None, weights: FloatArray) -> FloatArray:
    """Take the weighted mean of each stretch away."""
    if stretch is None:
        return values
    total = np.bincount(stretch, weights)
    means = np.stack([np.bincount(stretch, weights * column) / total for column in values.T], axis=1)
    return np.asarray(values - means[stretch])


def _scale(residual: FloatArray, robust: bool) -> float:
    if len(residual) == 0:
        return math.inf
    return float(np.mean(np.abs(residual)) if robust else np.sqrt(np.mean(residual**2)))


def _settling(signals: Signals, terms: Terms) -> IntArray:
    """Samples until the unknown derivative state is forgotten, at most a quarter of the span, shape (N,)."""
    if terms.derivative is None or terms.pole <= 0:
        return np.zeros(len(signals.age), dtype=np.int64)
    return np.minimum(math.ceil(math.log(_SETTLED) / math.log(terms.pole)), signals.length // 4)


def _shifted(values: _Flags, lag: int) -> _Flags:
    """values[k + lag] at k; what lies outside the record is False or −1."""
    far = min(abs(lag), len(values))
    outside = np.full(far, -1 if values.dtype != np.bool_ else False, dtype=values.dtype)
    if lag >= 0:
        return np.concatenate([values[far:], outside])
    return np.concatenate([outside, values[: len(values) - far]])


def _spans(age: IntArray) -> list[tuple[int, int]]:
    starts = np.flatnonzero(age == 0)
    ends = [*starts[1:], len(age)][: len(starts)]
    return [(int(a), int(a + np.max(age[a:b]) + 1)) for a, b in zip(starts, ends, strict=True)]
