"""The plants and load entries the estimator may choose from, and the way from a point to a `Plant`.

A point is a vector of eight coordinates (`auditor.kernels.points`) with a structure and a load entry, in
units of one base period and of the controller's gain: with u divided by K a loop of negative action looks like one
of positive action, and no bound depends on the units of the log.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import expm

from auditor.arrays import BoolArray, FloatArray, IntArray, read_only
from auditor.errors import CannotAnswerError, Problem
from auditor.identify.plant import Load, Plant
from auditor.kernels import points
from auditor.kernels.zero_order_hold import chain, oscillator, zero_of

ENTRY_NAMES = (
    "input",
    "output",
    "after the short lags",
    "after the long lag",
    "between the short lags",
    "input and output",
)
LONGEST_DELAY = 45  # whole samples
INTEGRATOR_POLE = 1e-9
"""Pole that stands for an integrator [1 / base period]: a time constant of a billion samples, beyond any log."""

_LOW = np.array([-14.0, -9.0, 0.0, 0.0, -9.0, -14.0, -8.0, -25.0])
_HIGH = np.array([6.0, 0.0, np.log(150.0), LONGEST_DELAY, -0.7, 3.0, 16.0, 25.0])
_INDISTINCT = 6.0
"""A pole this many times below the lowest frequency used turns the phase there by less than 10°: no log of this
length tells it from an integrator. With the usual lowest frequency 0.3/Ti it is a time constant of 20 Ti."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Family:
    """What the estimator may choose from.

    Attributes
    ----------
    low, high : ndarray, shape (8,)
        Bounds of the coordinates; equal where the declared type gives one.
    allowed : ndarray of bool, shape (6, 6)
        Structures × load entries that exist.
    integrator_below : float
        A lag chain whose pole is below this counts as integrating [1 / base period].
    """

    low: FloatArray
    high: FloatArray
    allowed: BoolArray
    integrator_below: float


def family(plant: str | None, lowest_frequency: float) -> Family:
    """Return the family for a declared plant type.

    Parameters
    ----------
    plant : str or None
        "self-regulating", "integrating", or None when the log is to tell.
    lowest_frequency : float
        Lowest frequency that is compared with the record [rad / base period].

    Raises
    ------
    CannotAnswerError
        When `plant` is "unstable": chains of lags and integrators only are identified here.
    """
    if plant == "unstable":
        raise CannotAnswerError(_unstable())
    low, high, allowed = _LOW.copy(), _HIGH.copy(), _allowed()
    below = {None: lowest_frequency / _INDISTINCT, "self-regulating": 0.0}.get(plant, np.inf)
    if plant == "integrating":
        low[points.LN_POLE] = high[points.LN_POLE] = np.log(INTEGRATOR_POLE)
        allowed[points.OSCILLATOR] = False
    return Family(low=read_only(low), high=read_only(high), allowed=read_only(allowed), integrator_below=below)


def _unstable() -> Problem:
    return Problem(
        what="This version does not identify plants that are unstable without their controller.",
        where="loop file, key plant",
        found='plant = "unstable"',
        expected='"self-regulating", "integrating", or no plant key',
        do="No replay is given for this loop. Remove the key only when the plant is in fact stable.",
    )


def _allowed() -> BoolArray:
    """Entries that sit behind a short lag need one, between short lags two; an oscillator has two ends only."""
    allowed = np.ones((points.STRUCTURES, points.ENTRIES), dtype=np.bool_)
    allowed[0, [points.AFTER_SHORT_LAGS, points.AFTER_LONG_LAG]] = False
    allowed[:2, points.BETWEEN_SHORT_LAGS] = False
    allowed[points.OSCILLATOR, points.AFTER_SHORT_LAGS :] = False
    return allowed


def to_plant(
    x: FloatArray, kind: Sequence[int] | IntArray, period: float, gain: float, kinds: Family, log_posterior: float = 0.0
) -> Plant:
    """Return the plant at a point.

    Parameters
    ----------
    x : ndarray, shape (8,)
        Coordinates.
    kind : sequence of int
        Structure and load entry.
    period : float
        Base period [s].
    gain : float
        The controller's gain K [actuator unit / measurement unit].
    kinds : Family
    log_posterior : float
    """
    m, entry = int(kind[0]), int(kind[1])
    oscillates = m == points.OSCILLATOR
    M, C = oscillator(x) if oscillates else chain(x, m)
    A, B0, B1, d = _sampled(M, float(x[points.DELAY]))
    static, ramp = _gains(x, oscillates, kinds.integrator_below)
    return Plant(
        A=A,
        B0=B0,
        B1=B1,
        C=read_only(C[1:] / gain),
        delay=d,
        structure="oscillatory" if oscillates else "lags",
        delay_s=float(x[points.DELAY]) * period,
        gain=None if static is None else static / gain,
        gain_per_s=None if ramp is None else ramp / (gain * period),
        time_constants_s=tuple(period * T for T in _time_constants(x, m, static is None)),
        damping=float(np.exp(x[points.LN_POLE])) if oscillates else None,
        zero_s=0.0 if oscillates or m == 0 else period * float(zero_of(float(x[points.ZERO]))),
        log_posterior=log_posterior,
        load=_load(x, entry),
        parameters=(*(float(v) for v in x), float(m), float(entry)),
    )


def _sampled(M: FloatArray, delay: float) -> tuple[FloatArray, FloatArray, FloatArray, int]:
    """A, B0, B1 and whole samples of delay from the plant behind its input (state 0)."""
    d = int(np.floor(delay))
    f = delay - d
    early, late = expm(M * f), expm(M * (1.0 - f))
    A = expm(M)[1:, 1:]
    return read_only(A), read_only(late[1:, 0]), read_only(late[1:, 1:] @ early[1:, 0]), d


def _gains(x: FloatArray, oscillates: bool, integrator_below: float) -> tuple[float | None, float | None]:
    """Static gain, or ramp per base period of an integrating plant, both for u in units of K."""
    gain = float(np.exp(x[points.LN_GAIN]))
    if oscillates:
        return gain * float(np.exp(x[points.LN_LAGS])), None
    pole = float(np.exp(x[points.LN_POLE]))
    return (None, gain) if pole < integrator_below else (gain / pole, None)


def _time_constants(x: FloatArray, m: int, integrating: bool) -> tuple[float, ...]:
    """Lags, longest first [base periods]; the oscillator has 1/w0 once, its damping says the rest."""
    lags = float(np.exp(x[points.LN_LAGS]))
    if m == points.OSCILLATOR:
        return (lags,)
    long = () if integrating else (float(np.exp(-x[points.LN_POLE])),)
    return tuple(sorted((*long, *(m * (lags / max(m, 1),))), reverse=True))


def _load(x: FloatArray, entry: int) -> Load:
    return Load(
        entry=ENTRY_NAMES[entry],
        phi=1.0 - float(np.exp(x[points.LN_CORNER])),
        walk=float(np.exp(x[points.LN_WALK])),
        noise=float(np.exp(x[points.LN_NOISE])),
    )
