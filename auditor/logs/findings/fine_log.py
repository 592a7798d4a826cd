"""A log faster than the loop."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.text import duration, number

_PHASE = {
    "stamps": "the instants are counted from the first row",
    "actuator": "the instants are where the actuator takes its new values",
}


def find(seen: Evidence) -> list[Finding]:
    """Report rows that come more often than the loop ran."""
    if seen.log_step >= seen.period:
        return []
    return [
        Finding(
            kind="fine-log",
            start=None,
            end=None,
            count=len(seen.beats),
            detail=f"a row every {duration(seen.log_step)}, {number(seen.period / seen.log_step, 2)} per base "
            f"period of {duration(seen.period)}",
            effect=f"the last row at or before each instant used, nothing averaged; {_PHASE[seen.phase_from]}",
        )
    ]
