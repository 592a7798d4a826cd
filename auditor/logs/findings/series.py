"""A signal as the archive stored it, its runs of one value, and how far it usually moves: shared by checks."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.runs import thinned

_MAD_PER_DEVIATION = 1.4826
_RESTS = 3
_USUAL = 0.99
_NEIGHBOURS = 1.5


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


def usual_run(values: FloatArray) -> float:
    """Return the 99th percentile of the lengths of the runs of one value, the longest left out; at least 1."""
    others = np.sort(runs_of_one_value(values)[1])[:-1]
    return max(1.0, float(np.quantile(others, _USUAL))) if len(others) else 1.0


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
    size = thinned(np.abs(np.diff(values)))
    size = size[size > 0]
    return max(_MAD_PER_DEVIATION * float(np.median(size)) if len(size) else 0.0, step or 0.0)
