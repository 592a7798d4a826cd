"""Several rows of the same stamp: agreeing ones are one row, conflicting ones are no value."""

from __future__ import annotations

import numpy as np

from auditor.arrays import IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import moment, plural

_MUCH = 0.01


def find(seen: Evidence) -> list[Finding]:
    """Report repeated stamps, those whose values disagree once per signal."""
    return _agreeing(seen) + _conflicting(seen)


def _agreeing(seen: Evidence) -> list[Finding]:
    """Report the repeated stamps at which every signal has one value."""
    conflict = np.zeros(len(seen.stamps), dtype=np.bool_)
    for trace in seen.recorded_traces:
        conflict |= trace.spoiled["conflict"]
    at = seen.stamps[seen.repeated & ~conflict]
    if len(at) == 0:
        return []
    return [
        Finding(
            kind="duplicate",
            start=int(at[0]),
            end=int(at[-1]),
            count=len(at),
            detail=f"{plural(len(at), 'stamp')} with more than one row, all of the same values",
            effect="one row of each kept",
        )
    ]


def _conflicting(seen: Evidence) -> list[Finding]:
    """Report the repeated stamps at which a signal has different values."""
    findings = []
    for trace in seen.recorded_traces:
        at = seen.stamps[trace.spoiled["conflict"]]
        if len(at) == 0:
            continue
        findings.append(
            Finding(
                kind="duplicate",
                start=int(at[0]),
                end=int(at[-1]),
                count=len(at),
                detail=f"{plural(len(at), 'stamp')} with rows of different values, the first at {moment(int(at[0]))}"
                + _repeated_hour(at),
                effect="not used: nobody can tell which row is right",
                signal=trace.name,
                weight="limits the answer" if len(at) > _MUCH * len(seen.stamps) else "note",
            )
        )
    return findings


def _repeated_hour(at: IntArray) -> str:
    """Name the usual reason when every stretch of conflicts is an hour or less long."""
    breaks = np.flatnonzero(np.diff(at) > 3_600_000_000_000)
    starts, stops = np.append(0, breaks + 1), np.append(breaks, len(at) - 1)
    whole = at[stops] - at[starts]
    hour = (len(at) > 2 * len(starts)) & bool((whole <= 3_600_000_000_000).all()) & bool((whole > 0).all())
    return "; a local clock that repeats an hour looks like this" if hour else ""
