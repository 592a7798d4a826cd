"""A signal that runs over one end of its range and goes on at the other: angles, counters, wrapped registers."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.findings.series import as_stored, excursions, joined, usual_change
from auditor.logs.findings.wording import moment, plural

CUSTOMARY = (360.0, 400.0, 2 * np.pi, 24.0, 256.0, 1024.0, 4096.0, 16384.0, 32768.0, 65536.0)
"""Full turns and register widths, from 0 or around 0."""

_WHOLE = 0.9
_FILLED = 0.95
_FAR = 10.0
_FEWEST = 2
_SAW = 3
_SLACK = 1e-3


def wraps(values: FloatArray, follows: BoolArray, trace: Trace) -> tuple[IntArray, float]:
    """Return the values after which the signal runs over its end, and the range it runs over [unit].

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
    if not np.isfinite(reach) or _WHOLE * reach <= _FAR * usual_change(values, trace.quantum):
        return none
    jumps = np.diff(values)
    whole = (np.abs(jumps) > _WHOLE * reach) & follows
    aside = excursions(values, follows, trace.quantum)
    lasting = whole.copy()
    lasting[np.concatenate((aside.first - 1, aside.last))] = False
    if lasting.sum() < _FEWEST:
        return none
    full = _full_range(float(values.min()), reach, trace)
    ways = np.sign(jumps[lasting])
    if full is None and lasting.sum() >= _SAW and np.all(ways == ways[0]) and lasting.sum() == whole.sum():
        full = reach
    return (np.flatnonzero(whole), full) if full is not None else none


def _full_range(low: float, reach: float, trace: Trace) -> float | None:
    """Return the range that the values fill from end to end, None when it is not one that wraps."""
    known = [(origin * size, size) for size in CUSTOMARY for origin in (0.0, -0.5)]
    if trace.low is not None and trace.high is not None:
        known.append((trace.low, trace.high - trace.low))
    for origin, size in known:
        inside = low >= origin - _SLACK * size and low + reach <= origin + size * (1 + _SLACK)
        if inside and reach >= _FILLED * size:
            return float(size)
    return None


def find(seen: Evidence) -> list[Finding]:
    """Report a measurement that wraps."""
    trace = seen.trace("measurement")
    if trace.constant:
        return []
    values, stamps = as_stored(trace, seen)
    at, full = wraps(values, joined(trace, seen, stamps), trace)
    if len(at) == 0:
        return []
    return [
        Finding(
            kind="range-wrap",
            start=int(stamps[at[0] + 1]),
            end=int(stamps[at[-1] + 1]),
            count=len(at),
            detail=f"the measurement runs over an end of its range of {full:.6g} {trace.unit}".rstrip()
            + f" and goes on at the other {plural(len(at), 'time')}, first at {moment(int(stamps[at[0] + 1]))}",
            effect="none, kept as recorded: every wrap looks like a change of the whole range; write the signal "
            "without wraps, as a distance from the setpoint, before the audit",
            signal=trace.name,
            weight="limits the answer",
        )
    ]
