"""Values an archive drew on straight lines between the ones it stored: no samples at all."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import plural
from auditor.logs.runs import runs_of
from auditor.text import percent

_SAME_SLOPE = 1e-6
_LEAST_SLOPE = 1e-6
_FEWEST_POINTS = 2
_STEPS = 5
_SHARE = 0.01


def on_lines(values: FloatArray, step: float | None) -> BoolArray:
    """Return True where a value lies on the straight line through its neighbours, in runs of at least two.

    Parameters
    ----------
    values : ndarray, shape (n,), [unit]
        Evenly spaced, NaN allowed.
    step : float or None
        Step of the lattice the values lie on [unit]: slopes of a few steps are equal by chance.
    """
    if len(values) < 3 or not np.isfinite(values).any():
        return np.zeros(len(values), dtype=np.bool_)
    slope = np.diff(values)
    size = np.minimum(np.abs(slope[1:]), np.abs(slope[:-1]))
    noise = 4 * np.finfo(np.float64).eps * float(np.nanmax(np.abs(values)))
    least = max(_LEAST_SLOPE * float(np.nanstd(values)), noise / _SAME_SLOPE, _STEPS * (step or 0.0))
    with np.errstate(invalid="ignore"):
        straight = (np.abs(np.diff(slope)) <= _SAME_SLOPE * size + noise) & (size > least)
    starts, stops = runs_of(straight)
    long = stops - starts >= _FEWEST_POINTS
    edges = np.zeros(len(values) + 1, dtype=np.int64)
    edges[starts[long] + 1] += 1
    edges[stops[long] + 1] -= 1
    return np.cumsum(edges[:-1]) > 0


def find(seen: Evidence) -> list[Finding]:
    """Report a measurement with interpolated points, by the loop file's word or by their look."""
    trace = seen.trace("measurement")
    if trace.constant:
        return []
    count = int(on_lines(trace.values, trace.quantum).sum())
    stated = trace.stored == "interpolated"
    if not stated and count <= _SHARE * len(trace.values):
        return []
    return [
        Finding(
            kind="interpolated",
            start=None,
            end=None,
            count=count,
            detail=f"{plural(count, 'value')}, {percent(count / max(1, len(trace.values)), 1)}, on straight lines "
            "between others" + ("; the loop file says that the archive interpolates" if stated else ""),
            effect="none, kept as recorded; interpolated points are no samples and make event rules look better than "
            "they are: ask the archive for the stored values",
            signal=trace.name,
            weight="limits the answer",
        )
    ]
