"""A setpoint that is moved in ramps: a change at every row, or at every few."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import moment, plural
from auditor.logs.runs import runs_of
from auditor.text import duration, number, percent

_CHANGES = 10
_LIKE = 2.0
_APART = 10
_ROUNDING = 1.01


def ramps(setpoint: FloatArray, step: float | None = None) -> tuple[IntArray, IntArray]:
    """Return first and last sample of the ramps.

    A ramp has ten changes or more in one direction, each at most twice the one before or half of it (a step of the
    stored values more or less is rounding), at most ten samples apart.

    Parameters
    ----------
    setpoint : ndarray, shape (N,)
        NaN allowed; a change over a hole counts as any other.
    step : float or None
        Step of the stored values.
    """
    there = np.flatnonzero(np.isfinite(setpoint))
    change = np.diff(setpoint[there])
    moved = np.flatnonzero(change != 0)
    at, size = there[moved + 1], change[moved]
    earlier, later = np.abs(size[:-1]), np.abs(size[1:])
    larger, smaller = np.maximum(earlier, later), np.minimum(earlier, later)
    like = (larger <= _LIKE * smaller * _ROUNDING) | (larger - smaller <= _ROUNDING * (step or 0.0))
    alike = (size[1:] * size[:-1] > 0) & like & (np.diff(at) <= _APART)
    starts, stops = runs_of(alike)
    long = stops - starts + 1 >= _CHANGES
    return at[starts[long]], at[stops[long]]


def find(seen: Evidence) -> list[Finding]:
    """Report the ramps of the setpoint."""
    trace = seen.trace("setpoint")
    if trace.constant:
        return []
    first, last = ramps(trace.sampled, trace.quantum)
    if len(first) == 0:
        return []
    rise = trace.sampled[last] - trace.sampled[first - 1]
    largest = int(np.argmax(np.abs(rise)))
    share = float((last - first + 1).sum()) / len(trace.sampled)
    lasting = float(last[largest] - first[largest] + 1) * seen.period
    return [
        Finding(
            kind="setpoint-ramp",
            start=seen.time_at(int(first[0])),
            end=seen.time_at(int(last[-1])),
            count=len(first),
            detail=f"{plural(len(first), 'ramp')}, {percent(share, 2)} of the samples, the largest by "
            f"{number(float(rise[largest]))} {trace.unit}".rstrip()
            + f" over {duration(lasting)} from {moment(seen.time_at(int(first[largest])))}",
            effect="none, kept as recorded; along a ramp the setpoint changes all the time, and a controller that "
            "acts on every change of it saves nothing meanwhile",
            signal=trace.name,
        )
    ]
