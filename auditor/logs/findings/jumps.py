"""Jumps of a signal: away and back at once, or over its whole range; shared by the checks that tell them apart."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.findings.series import as_stored, joined, runs_of_one_value, usual_change

CUSTOMARY_RANGES = (360.0, 400.0, 2 * np.pi, 24.0, 256.0, 1024.0, 4096.0, 16384.0, 32768.0, 65536.0)
"""Full turns and register widths, from 0 or around 0."""

FAR = 10.0
"""Usual changes that a jump is larger than."""

_BACK = 0.5
_LONGEST = 100
_LEVEL_REPEATS = 3
_HELD = 3
_AROUND = 30
_WHOLE = 0.9
_FILLED = 0.95
_FEWEST = 2
_SAW = 3
_SLACK = 1e-3
_HALF = 0.5


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Excursions:
    """Runs of one value that a signal jumps to, and back from to about where it was.

    Attributes
    ----------
    first, last : ndarray of int64, shape (E,)
        First and last stored value of each.
    level, height : ndarray, shape (E,), [unit]
        The value, and its distance from the nearer neighbour.
    reset : ndarray of bool, shape (E,)
        True where the value is held for three rows, or is the same in three excursions.
    """

    first: IntArray
    last: IntArray
    level: FloatArray
    height: FloatArray
    reset: BoolArray

    def where(self, mask: BoolArray) -> Excursions:
        """Return the marked ones."""
        return Excursions(
            first=self.first[mask],
            last=self.last[mask],
            level=self.level[mask],
            height=self.height[mask],
            reset=self.reset[mask],
        )


def excursions(values: FloatArray, follows: BoolArray, step: float | None) -> Excursions:
    """Find the jumps away and back, of more than ten usual changes both ways.

    Usual are the changes of the whole signal, and those of the thirty values on either side: one restless stretch of
    a calm signal is no row of jumps.

    Parameters
    ----------
    values : ndarray, shape (n,), [unit]
        Finite values in the order they were stored.
    follows : ndarray of bool, shape (n − 1,)
        True where a value follows the one before without a hole.
    step : float or None
        Step of the stored values [unit].
    """
    least = FAR * usual_change(values, step)
    if not (np.abs(np.diff(values)) > least).any():
        return _none()
    starts, lengths = runs_of_one_value(values)
    jumps = np.diff(values[starts])
    away, back = jumps[:-1], jumps[1:]
    height = np.minimum(np.abs(away), np.abs(back))
    first = starts[1:-1]
    last = first + lengths[1:-1] - 1
    chosen = (height > least) & (np.abs(away + back) <= _BACK * height)
    chosen &= (away * back < 0) & (lengths[1:-1] <= _LONGEST)
    chosen[chosen] &= follows[first[chosen] - 1] & follows[last[chosen]]
    chosen[chosen] &= height[chosen] > FAR * _changes_around(values, first[chosen], last[chosen])
    first, last, height = first[chosen], last[chosen], height[chosen]
    level = values[first]
    _, which, repeats = np.unique(level, return_inverse=True, return_counts=True)
    reset = (last - first + 1 >= _HELD) | (repeats[which.reshape(-1)] >= _LEVEL_REPEATS)
    return Excursions(first=first, last=last, level=level, height=height, reset=np.asarray(reset, dtype=np.bool_))


def _none() -> Excursions:
    """Return no excursions."""
    at, size = np.empty(0, dtype=np.int64), np.empty(0)
    return Excursions(first=at, last=at, level=size, height=size, reset=np.empty(0, dtype=np.bool_))


def _changes_around(values: FloatArray, first: IntArray, last: IntArray) -> FloatArray:
    """Return the median size of the changes on the more restless side of each excursion, shape (E,)."""
    size = np.abs(np.diff(values))
    nearby = np.arange(1, _AROUND + 1)
    sides = (_medians(size, first[:, None] - 1 - nearby), _medians(size, last[:, None] + nearby))
    return np.maximum(*sides)


def _medians(size: FloatArray, at: IntArray) -> FloatArray:
    """Return the median of the sizes at each row of places, those of nought left out; 0 where none is left."""
    there = np.where((at >= 0) & (at < len(size)), size[np.clip(at, 0, len(size) - 1)], 0.0)
    some = there > 0
    ordered = np.sort(np.where(some, there, np.inf), axis=1)
    count = some.sum(axis=1)
    middle = ordered[np.arange(len(at)), np.maximum(count - 1, 0) // 2]
    return np.where(count > 0, middle, 0.0)


def wraps(values: FloatArray, follows: BoolArray, trace: Trace) -> tuple[IntArray, float]:
    """Return the values after which a signal runs over its end, and the range it runs over [unit].

    A wrap is a jump over nine tenths of the signal's range. There must be two of them, and the range must be a full
    turn, a register or the stated one; or three of them in one direction and none back, as a counter makes.

    Parameters
    ----------
    values : ndarray, shape (n,), [unit]
        Finite, as stored.
    follows : ndarray of bool, shape (n − 1,)
        True where a value follows the one before without a hole.
    trace : Trace
        Its stated range and the step of its values.
    """
    none = np.empty(0, dtype=np.int64), 0.0
    reach = float(np.ptp(values)) if len(values) else 0.0
    if not np.isfinite(reach) or _WHOLE * reach <= FAR * usual_change(values, trace.quantum):
        return none
    jumps = np.diff(values)
    whole = (np.abs(jumps) > _WHOLE * reach) & follows
    if whole.sum() < _FEWEST:
        return none
    lasting = whole & ~beside(excursions(values, follows, trace.quantum), len(jumps))
    if lasting.sum() < _FEWEST:
        return none
    full = _full_range(float(values.min()), reach, trace)
    ways = np.sign(jumps[lasting])
    if full is None and lasting.sum() >= _SAW and np.all(ways == ways[0]) and lasting.sum() == whole.sum():
        full = reach
    return (np.flatnonzero(whole), full) if full is not None else none


def beside(found: Excursions, changes: int) -> BoolArray:
    """Return True for the changes, of so many, by which a signal goes to an excursion and back."""
    mask = np.zeros(changes, dtype=np.bool_)
    mask[np.concatenate((found.first - 1, found.last))] = True
    return mask


def _full_range(low: float, reach: float, trace: Trace) -> float | None:
    """Return the range that the values fill from end to end, None when it is not one that wraps."""
    known = [(origin * size, size) for size in CUSTOMARY_RANGES for origin in (0.0, -0.5)]
    if trace.low is not None and trace.high is not None:
        known.append((trace.low, trace.high - trace.low))
    for origin, size in known:
        inside = low >= origin - _SLACK * size and low + reach <= origin + size * (1 + _SLACK)
        if inside and reach >= _FILLED * size:
            return float(size)
    return None


def excursions_of(trace: Trace, seen: Evidence) -> tuple[Excursions, FloatArray, IntArray]:
    """Return the excursions of a signal that are no wraps, with its values and their times as stored."""
    values, stamps = as_stored(trace, seen)
    follows = joined(trace, seen, stamps)
    found = excursions(values, follows, trace.quantum)
    at, full = wraps(values, follows, trace)
    return found.where(found.height < _HALF * full) if len(at) else found, values, stamps
