"""A signal as the archive stored it, cut into runs of one value, and how far it usually moves: shared by checks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.evidence import Evidence, Trace

_MAD_PER_DEVIATION = 1.4826
_RESTS = 3
_FAR = 10.0
_BACK = 0.5
_LONGEST = 100
_NEIGHBOURS = 1.5
_LEVEL_REPEATS = 3
_HELD = 3


def as_stored(trace: Trace, seen: Evidence) -> tuple[FloatArray, IntArray]:
    """Return the finite values with their times [ns]: row by row, or sample by sample where values are held."""
    if trace.held:
        there = np.flatnonzero(np.isfinite(trace.sampled))
        return trace.sampled[there], seen.start + np.rint(there * (seen.period * 1e9)).astype(np.int64)
    there = np.flatnonzero(np.isfinite(trace.values))
    return trace.values[there], seen.stamps[there]


def joined(trace: Trace, seen: Evidence, stamps: IntArray) -> BoolArray:
    """Return True where a stored value follows the one before without a hole, shape (n − 1,)."""
    if not seen.regular:
        return np.ones(max(0, len(stamps) - 1), dtype=np.bool_)
    spacing = seen.period if trace.held else seen.log_step
    return np.asarray(np.diff(stamps) <= _NEIGHBOURS * spacing * 1e9)


def runs_of_one_value(values: FloatArray) -> tuple[IntArray, IntArray]:
    """Return the starts and the lengths of the runs of equal values, in order."""
    if len(values) == 0:
        return np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)
    starts = np.concatenate(([0], np.flatnonzero(values[1:] != values[:-1]) + 1))
    return starts, np.diff(np.append(starts, len(values)))


def at_rest(levels: FloatArray, lengths: IntArray, longer: float) -> BoolArray:
    """Return True for the runs at an end of the signal's range where it rests again and again: nothing is stuck there.

    A flow that is nought every night, or a transmitter at the end of its range, is what it looks like; three runs
    `longer` than this at that end make a rest.
    """
    rest = np.zeros(len(levels), dtype=np.bool_)
    for end in (levels.min(), levels.max()):
        there = levels == end
        if np.sum(there & (lengths > longer)) >= _RESTS:
            rest |= there
    return rest


def usual_change(values: FloatArray, step: float | None) -> float:
    """Return the deviation of the changes, those of nought left out; at least the `step` of the stored values.

    A median over the changes that are some: neither the values a rounded signal repeats nor a few jumps move it.
    """
    size = np.abs(np.diff(values))
    size = size[size > 0]
    return max(_MAD_PER_DEVIATION * float(np.median(size)) if len(size) else 0.0, step or 0.0)


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

    Parameters
    ----------
    values : ndarray, shape (n,), [unit]
        Finite values in the order they were stored.
    follows : ndarray of bool, shape (n − 1,)
        True where a value follows the one before without a hole.
    step : float or None
        Step of the stored values [unit].
    """
    starts, lengths = runs_of_one_value(values)
    jumps = np.diff(values[starts]) if len(starts) else np.empty(0)
    away, back = jumps[:-1], jumps[1:]
    height = np.minimum(np.abs(away), np.abs(back))
    inner = slice(1, -1)
    first, last = starts[inner], starts[inner] + lengths[inner] - 1
    chosen = (height > _FAR * usual_change(values, step)) & (np.abs(away + back) <= _BACK * height)
    chosen &= (away * back < 0) & (lengths[inner] <= _LONGEST)
    chosen[chosen] &= follows[first[chosen] - 1] & follows[last[chosen]]
    first, last, height = first[chosen], last[chosen], height[chosen]
    level = values[first]
    _, which, repeats = np.unique(level, return_inverse=True, return_counts=True)
    reset = (last - first + 1 >= _HELD) | (repeats[which.reshape(-1)] >= _LEVEL_REPEATS)
    return Excursions(first=first, last=last, level=level, height=height, reset=np.asarray(reset, dtype=np.bool_))


def excursions_of(trace: Trace, seen: Evidence) -> tuple[Excursions, FloatArray, IntArray]:
    """Return the excursions of a signal, with its values and their times as stored."""
    values, stamps = as_stored(trace, seen)
    return excursions(values, joined(trace, seen, stamps), trace.quantum), values, stamps
