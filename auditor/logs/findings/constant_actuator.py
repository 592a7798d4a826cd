"""An actuator that never moves: nothing can be learnt about what it does."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence

_MOVED = 1e-9


def never_moves(values: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> bool:
    """Tell whether the values are all the same up to rounding; nothing at all does not move either."""
    finite = values[np.isfinite(values)]
    return len(finite) == 0 or bool(np.ptp(finite) <= _MOVED * max(1e-300, float(np.abs(finite).max())))


def find(seen: Evidence) -> list[Finding]:
    """Report an actuator with a single value over the valid samples."""
    trace = seen.trace("actuator")
    used = trace.sampled[seen.cause == 0]
    if len(used) == 0 or not never_moves(used):
        return []
    return [
        Finding(
            kind="constant-actuator",
            start=None,
            end=None,
            count=len(used),
            detail=f"{used[0]:g} {trace.unit}".rstrip() + f" at all {len(used)} valid samples",
            effect="nothing can be answered: change the setpoint by a few times the noise, or give the actuator a "
            "bump, in automatic, and log on",
            signal=trace.name,
            weight="stops the answer",
        )
    ]
