"""Ranges and constants read off the signals themselves."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from auditor.arrays import FloatArray
from auditor.draft.guess import CHECK, LIKELY, SURE
from auditor.draft.law import extremes

# The usual ranges of a command, and the unit that goes with each.
USUAL = ((0.0, 1.0, "1"), (4.0, 20.0, "mA"), (0.0, 100.0, "%"))
SLACK = 0.02
STOOD = 0.005


@dataclass(frozen=True, slots=True)
class RangeGuess:
    """The actuator's limits, each with its reason; None where the log does not show them."""

    low: float | None
    high: float | None
    reason: str
    sure: str
    high_reason: str = "see low"


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
        return _with_usual(known, usual, unit, stays)
    if stays:
        low_end = least if least in stays else None
        high_end = most if most in stays else None
        ends = " and ".join(f"{end:.5g}" for end in stays)
        return RangeGuess(low_end, high_end, f"{went} and stood at {ends} for at least 1 % of the time", CHECK)
    return RangeGuess(None, None, f"{went} and never stood at a limit", CHECK)


def _with_usual(known: FloatArray, usual: tuple[float, float, str], unit: str, stays: Sequence[float]) -> RangeGuess:
    """Take each end at which the actuator stood, and the end of the usual range where it stood at none."""
    low, high = usual[:2]
    least, most = float(known.min()), float(known.max())
    reached = any(min(abs(end - low), abs(end - high)) <= SLACK * (high - low) for end in stays)
    at_least, at_most = (_stood(known, end) for end in (least, most))
    went = f"it went from {least:.5g} to {most:.5g}"
    known_unit = bool(unit)
    clear = reached or at_least is not None or at_most is not None
    sure = SURE if known_unit and reached else LIKELY if known_unit or clear else CHECK
    around = f"{low:g}…{high:g} is the usual range around that"
    low_reason = f"{went}; {around}" if at_least is None else f"{went} and {at_least}"
    high_reason = at_most or ("see low" if at_least is None else around)
    return RangeGuess(
        low if at_least is None else least,
        high if at_most is None else most,
        low_reason,
        sure,
        high_reason=high_reason,
    )


def _stood(known: FloatArray, end: float) -> str | None:
    """Say how often a signal stood exactly at its smallest or largest value, None when it did not noticeably.

    A stop gathers rows: a coarsely stored signal without one is at its last step more seldom than at the one before.
    """
    rows = known == end
    share = float(np.mean(rows))
    inner = known[~rows]
    if share < STOOD or not len(inner):
        return None
    beside = inner[np.argmin(np.abs(inner - end))]
    if share <= float(np.mean(known == beside)):
        return None
    return f"stood at exactly {end:.5g} in {100 * share:.1f} % of the rows, which is taken as its limit"


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
