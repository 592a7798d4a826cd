"""A measurement that drops to one certain value for a while and comes back: a sensor that starts again."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.jumps import excursions_of
from auditor.logs.findings.wording import moment, plural
from auditor.text import percent

_MUCH = 0.001


def find(seen: Evidence) -> list[Finding]:
    """Report the jumps to a value that is held for some rows, or that is the same every time, and back."""
    trace = seen.trace("measurement")
    if trace.constant:
        return []
    all_found, values, stamps = excursions_of(trace, seen)
    found = all_found.where(all_found.reset)
    if len(found.first) == 0:
        return []
    rows = found.last - found.first + 1
    longest = int(np.argmax(rows))
    levels = np.unique(found.level)
    told = ", ".join(f"{level:g}" for level in levels[:3]) + (" …" if len(levels) > 3 else "")
    share = float(rows.sum()) / len(values)
    return [
        Finding(
            kind="sensor-reset",
            start=int(stamps[found.first[0]]),
            end=int(stamps[found.last[-1]]),
            count=len(found.first),
            detail=f"the measurement jumps {plural(len(found.first), 'time')} to {told} {trace.unit}".rstrip()
            + f" and back, {percent(share, 2)} of the values, the longest for {plural(int(rows[longest]), 'row')} from "
            f"{moment(int(stamps[found.first[longest]]))}: a sensor that starts again looks like that",
            effect="none, kept as recorded: exclude these times, or state a range, if the process was never there",
            signal=trace.name,
            weight="limits the answer" if share > _MUCH else "note",
        )
    ]
