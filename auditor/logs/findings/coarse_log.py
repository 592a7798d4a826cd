"""A log slower than the loop."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.text import duration, number


def find(seen: Evidence) -> list[Finding]:
    """Report rows that come less often than the loop ran."""
    if seen.log_step <= seen.period:
        return []
    return [
        Finding(
            kind="coarse-log",
            start=None,
            end=None,
            count=len(seen.beats),
            detail=f"a row every {duration(seen.log_step)}, {number(seen.log_step / seen.period, 2)} base periods of "
            f"{duration(seen.period)}",
            effect=f"every row held for {duration(seen.log_step)}; updates closer than {duration(5 * seen.log_step)} "
            "(five rows) are not answered",
            weight="limits the answer",
        )
    ]
