"""Ranges and constants read off the signals themselves."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from auditor.arrays import FloatArray
from auditor.draft.guess import CHECK, LIKELY, SURE
from auditor.draft.law import extremes


@dataclass(frozen=True, slots=True)
class RangeGuess:
    """The actuator's limits; None where the log does not show them."""

    low: float | None
    high: float | None
    reason: str
    sure: str


def actuator_range(values: FloatArray, unit: str) -> RangeGuess:
    """Guess the limits of an actuator from where it went and where it stayed.

    Parameters
    ----------
    values : ndarray, shape (N,)
    unit : str
    """
    known = values[np.isfinite(values)]
    least, most = float(known.min()), float(known.max())
    went = f"it went from {least:.5g} to {most:.5g}"
    stays = tuple(extremes(values))
    for low, high in ((0.0, 100.0), (4.0, 20.0), (0.0, 1.0)):
        slack = 0.02 * (high - low)
        if not low - slack <= least <= most <= high + slack:
            continue
        stated = unit == {100.0: "%", 20.0: "mA", 1.0: "1"}[high]
        reached = any(abs(end - low) <= slack or abs(end - high) <= slack for end in stays)
        if stated or reached or (high == 100.0 and most > 10.0):
            sure = SURE if stated and reached else LIKELY if stated or reached else CHECK
            stood = " and stood at a limit" if reached else ""
            return RangeGuess(low, high, f"{went}{stood}; {low:g}…{high:g} is the usual range around that", sure)
    if stays:
        low_end = least if least in stays else None
        high_end = most if most in stays else None
        ends = " and ".join(f"{end:.5g}" for end in stays)
        return RangeGuess(low_end, high_end, f"{went} and stood at {ends} for at least 1 % of the time", CHECK)
    return RangeGuess(None, None, f"{went} and never stood at a limit", CHECK)


def constant_setpoint(measurement: FloatArray) -> float:
    """Return the mean of the measurement (integral action holds it at the setpoint), rounded to half its spread."""
    known = measurement[np.isfinite(measurement)]
    spread = float(np.std(known))
    mean = float(np.mean(known))
    if spread <= 0:
        return mean
    return round(mean, -math.floor(math.log10(spread / 2)))
