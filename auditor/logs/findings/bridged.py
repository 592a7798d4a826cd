"""Holes that were held instead of cutting the record."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import plural
from auditor.logs.runs import runs_of
from auditor.text import duration


def describe_bridges(held: BoolArray, start: int, period: float, bridge: float) -> list[Finding]:
    """Report the samples inside spans that were not recorded.

    Parameters
    ----------
    held : ndarray of bool, shape (N,)
        True where a sample is inside a span but not valid.
    start : int
        Time of sample 0 [ns since 1970 UTC].
    period, bridge : float
        Base period and longest hole that is held [s].
    """
    starts, stops = runs_of(held)
    if len(starts) == 0:
        return []
    longest = float((stops - starts).max()) * period
    return [
        Finding(
            kind="bridged",
            start=start + round(int(starts[0]) * period * 1e9),
            end=start + round((int(stops[-1]) - 1) * period * 1e9),
            count=int(held.sum()),
            detail=f"{plural(len(starts), 'hole')} of at most {duration(bridge)}, the longest {duration(longest)}",
            effect=f"measurement, setpoint and actuator held over {plural(int(held.sum()), 'sample')}",
        )
    ]


def find(seen: Evidence) -> list[Finding]:
    """Report the holes that are held."""
    inside = np.zeros(len(seen.cause) + 1, dtype=np.int64)
    inside[seen.spans[:, 0]] += 1
    inside[seen.spans[:, 1]] -= 1
    held = (np.cumsum(inside[:-1]) > 0) & (seen.cause != 0)
    return describe_bridges(held, seen.start, seen.period, seen.bridge)
