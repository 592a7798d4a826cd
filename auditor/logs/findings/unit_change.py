"""From some row on, a signal is stored in another unit or over another range: level and scatter by the same factor."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.findings.jumps import FAR, beside, excursions
from auditor.logs.findings.series import as_stored, joined, usual_change
from auditor.logs.findings.wording import moment, plural
from auditor.text import number

OFFSET_UNITS = ((1.8, 32.0), (1 / 1.8, -32 / 1.8), (1.0, 273.15), (1.0, -273.15))
"""Factor and offset between Celsius, Fahrenheit and kelvin; other units differ by a factor alone."""

_MOST = 20
_ROWS = 300
_FEWEST = 100
_FACTOR = 1.5
_AGREE = 1.25
_LEVEL_AGREES = 0.05
_CALM = 0.9
_APART = 2.0
_AT_ONCE = 0.5
_ROOM = 0.3


@dataclass(frozen=True, slots=True, kw_only=True)
class UnitChange:
    """Index of the first value in the new unit, factor and offset, and the levels before and after [unit]."""

    at: int
    factor: float
    offset: float
    before: float
    after: float


def unit_changes(values: FloatArray, jumps: IntArray) -> list[UnitChange]:
    """Return the jumps after which level and scatter have changed by the same factor.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Finite, as stored.
    jumps : ndarray of int64
        Values before a jump, ascending.
    """
    found: list[UnitChange] = []
    for jump in jumps.tolist():
        change = _judged(values, jump + 1)
        if change is not None and (not found or change.at - found[-1].at >= _FEWEST):
            found.append(change)
    return found


def _judged(values: FloatArray, at: int) -> UnitChange | None:
    """Compare up to 300 values on both sides."""
    earlier, later = values[max(0, at - _ROWS) : at], values[at : at + _ROWS]
    if min(len(earlier), len(later)) < _FEWEST:
        return None
    before, after = float(np.median(earlier)), float(np.median(later))
    scatter, scatter_after = _scatter(earlier), _scatter(later)
    if min(scatter, scatter_after) <= 0 or before * after == 0:
        return None
    jump = abs(float(values[at] - values[at - 1]))
    if jump < _AT_ONCE * abs(after - before) or abs(after - before) <= _APART * max(
        float(np.std(earlier)), float(np.std(later))
    ):
        return None
    factor, offset = after / before, 0.0
    matched = abs(np.log(abs(factor))) > np.log(_FACTOR) and factor > 0 and _like(scatter_after / scatter, factor)
    for times, plus in OFFSET_UNITS:
        close = abs(after - (times * before + plus)) <= _LEVEL_AGREES * min(abs(plus), abs(after - before))
        if not matched and close and _like(scatter_after / scatter, times):
            factor, offset, matched = times, plus, True
    return UnitChange(at=at, factor=factor, offset=offset, before=before, after=after) if matched else None


def _like(ratio: float, factor: float) -> bool:
    """Tell whether the scatter has changed by the factor, roughly: it is never quite the same on both sides."""
    return bool(abs(np.log(ratio / factor)) < max(np.log(_AGREE), _ROOM * abs(np.log(factor))))


def _scatter(values: FloatArray) -> float:
    """Return the mean size of the changes, the largest tenth left out."""
    size = np.sort(np.abs(np.diff(values)))
    return float(np.mean(size[: int(_CALM * len(size))]))


def find(seen: Evidence) -> list[Finding]:
    """Report measurement and actuator where they change their unit within the log."""
    return [
        finding
        for trace in (seen.trace("measurement"), seen.trace("actuator"))
        if not trace.constant
        for finding in _looked_at(trace, seen)
    ]


def _looked_at(trace: Trace, seen: Evidence) -> list[Finding]:
    """Judge the largest jumps of one signal that it does not come back from at once."""
    values, stamps = as_stored(trace, seen)
    if len(values) < 2 * _FEWEST:
        return []
    size = np.abs(np.diff(values))
    large = np.flatnonzero(size > FAR * usual_change(values, trace.quantum))
    if len(large) == 0:
        return []
    aside = beside(excursions(values, joined(trace, seen, stamps), trace.quantum), len(size))
    large = large[~aside[large]]
    largest = np.sort(large[np.argsort(size[large], kind="stable")[-_MOST:]])
    changes = [c for c in unit_changes(values, largest) if not _followed(c, trace, seen, stamps)]
    return [_told(trace, changes, stamps)] if changes else []


def _followed(change: UnitChange, trace: Trace, seen: Evidence, stamps: IntArray) -> bool:
    """Tell whether the setpoint made the same move: then the process did, not the unit."""
    setpoint = seen.trace("setpoint")
    if trace.role != "measurement" or setpoint.constant:
        return False
    sample = round((int(stamps[change.at]) - seen.start) / (seen.period * 1e9))
    earlier, later = setpoint.sampled[max(0, sample - _ROWS) : sample], setpoint.sampled[sample : sample + _ROWS]
    if not (np.isfinite(earlier).any() and np.isfinite(later).any()):
        return False
    move = float(np.nanmedian(later) - np.nanmedian(earlier))
    return abs(move - (change.after - change.before)) < 0.5 * abs(change.after - change.before)


def _told(trace: Trace, changes: list[UnitChange], stamps: IntArray) -> Finding:
    """Say when, and by how much."""
    first = changes[0]
    plus = f" {'+' if first.offset > 0 else '−'} {abs(first.offset):.5g}" if first.offset else ""
    return Finding(
        kind="unit-change",
        start=int(stamps[first.at]),
        end=int(stamps[changes[-1].at]),
        count=len(changes),
        detail=f"{plural(len(changes), 'time')} level and scatter change at once as in another unit or range, first at "
        f"{moment(int(stamps[first.at]))}: from about {number(first.before)} to {number(first.after)} {trace.unit}, "
        f"× {number(first.factor)}{plus}",
        effect="none, kept as recorded: audit the stretches one by one, or write the signal in one unit",
        signal=trace.name,
        weight="limits the answer",
    )
