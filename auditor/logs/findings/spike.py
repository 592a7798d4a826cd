"""Single values far from both neighbours: a disturbed line, a bad conversion, a lost telegram."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.jumps import excursions_of
from auditor.logs.findings.wording import moment, plural
from auditor.text import number, percent

_MOST = 0.01
_MUCH = 0.001


def find(seen: Evidence) -> list[Finding]:
    """Report the values that the measurement jumps to and back from, when they are few.

    A signal with more of them than one in a hundred pulses by nature; and jumps over the whole range of a signal
    that runs over its end are told by `range-wrap`.
    """
    trace = seen.trace("measurement")
    if trace.constant:
        return []
    all_found, values, stamps = excursions_of(trace, seen)
    found = all_found.where(~all_found.reset)
    if len(found.first) == 0 or len(found.first) > _MOST * len(values):
        return []
    largest = int(np.argmax(found.height))
    share = len(found.first) / len(values)
    return [
        Finding(
            kind="spike",
            start=int(stamps[found.first[0]]),
            end=int(stamps[found.last[-1]]),
            count=len(found.first),
            detail=f"{plural(len(found.first), 'value')} far from both neighbours, {percent(share, 3)} of the values, "
            f"the largest {found.level[largest]:g} {trace.unit}".rstrip()
            + f" at {moment(int(stamps[found.first[largest]]))}, {number(float(found.height[largest]))} off",
            effect="none, kept as recorded: a threshold rule sends each of them; exclude the time, or state a range, "
            "if the process was never there",
            signal=trace.name,
            weight="limits the answer" if share > _MUCH else "note",
        )
    ]
