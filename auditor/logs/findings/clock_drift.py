"""The clock of the log runs faster or slower than the stated period."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import plural
from auditor.text import duration

_SMALL = 0.2
_LEAST = 0.5
_BLOCKS = 8
_SAME_WAY = 7


def find(seen: Evidence) -> list[Finding]:
    """Report a drift of half a spacing or more over the log, when it goes the same way nearly everywhere."""
    small = np.where(np.abs(seen.unevenness) < _SMALL, seen.unevenness, 0.0)
    total = float(small.sum())
    if not seen.regular or len(small) < _BLOCKS or abs(total) < _LEAST:
        return []
    parts = [float(block.sum()) for block in np.array_split(small, _BLOCKS)]
    if sum(part * total > 0 for part in parts) < _SAME_WAY:
        return []
    rate = total / len(small)
    return [
        Finding(
            kind="clock-drift",
            start=int(seen.beats[0]),
            end=int(seen.beats[-1]),
            count=len(seen.beats),
            detail=f"the stamps drift by {duration(abs(total) * seen.unit)} against the period of "
            f"{duration(seen.period)}, {1e6 * rate:.3g} parts per million",
            effect=f"snapped to the grid; {plural(seen.crowded, 'row')} left out as a later one fell into the same "
            "period",
        )
    ]
