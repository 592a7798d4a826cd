"""A signal that runs over one end of its range and goes on at the other: angles, counters, wrapped registers."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.jumps import wraps
from auditor.logs.findings.series import as_stored, joined
from auditor.logs.findings.wording import moment, plural


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
