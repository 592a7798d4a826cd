"""Ranges and constants read off the signals themselves."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from auditor.arrays import FloatArray
from auditor.draft.guess import CHECK, LIKELY, SURE
from auditor.draft.law import extremes

# The usual ranges of a command, and the unit that goes with each.
USUAL = ((0.0, 1.0, "1"), (4.0, 20.0, "mA"), (0.0, 100.0, "%"))
SLACK = 0.02


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
        Empty when it is not known.
    """
    known = values[np.isfinite(values)]
    least, most = float(known.min()), float(known.max())
    went = f"it went from {least:.5g} to {most:.5g}"
    stays = tuple(extremes(values))
    usual = next((u for u in USUAL if _fits(u, least, most, unit)), None)
    if usual is not None:
        low, high = usual[:2]
        reached = any(min(abs(end - low), abs(end - high)) <= SLACK * (high - low) for end in stays)
        sure = SURE if unit and reached else LIKELY if unit or reached else CHECK
        stood = " and stood at a limit" if reached else ""
        return RangeGuess(low, high, f"{went}{stood}; {low:g}…{high:g} is the usual range around that", sure)
    if stays:
        low_end = least if least in stays else None
        high_end = most if most in stays else None
        ends = " and ".join(f"{end:.5g}" for end in stays)
        return RangeGuess(low_end, high_end, f"{went} and stood at {ends} for at least 1 % of the time", CHECK)
    return RangeGuess(None, None, f"{went} and never stood at a limit", CHECK)


def _fits(usual: tuple[float, float, str], least: float, most: float, unit: str) -> bool:
    """Without a unit, 4…20 is too special to be guessed, and 0…100 must be used at least to a tenth."""
    low, high, its_unit = usual
    slack = SLACK * (high - low)
    inside = low - slack <= least and most <= high + slack
    return inside and (unit == its_unit or (not unit and its_unit != "mA" and most > 0.1 * high))


def constant_setpoint(measurement: FloatArray) -> float:
    """Return the mean of the measurement (integral action holds it at the setpoint), rounded to half its spread."""
    known = measurement[np.isfinite(measurement)]
    spread = float(np.std(known))
    mean = float(np.mean(known))
    if spread <= 0:
        return mean
    return round(mean, -math.floor(math.log10(spread / 2)))
