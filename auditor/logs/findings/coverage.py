"""How much of the log's time can be used."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import ABSENT, Evidence
from auditor.logs.findings.wording import moment, plural
from auditor.text import duration, percent

_LITTLE = 0.5


def find(seen: Evidence) -> list[Finding]:
    """Report time from first to last row, the share that has rows, and the share inside spans; always there."""
    count = len(seen.cause)
    present = np.zeros(count, dtype=np.bool_)
    for trace in seen.recorded_traces:
        present |= trace.state != ABSENT
    usable = float((seen.spans[:, 1] - seen.spans[:, 0]).sum()) / count
    first, last = seen.time_at(0), seen.time_at(count - 1)
    return [
        Finding(
            kind="coverage",
            start=first,
            end=last,
            count=count,
            detail=f"{plural(count, 'sample')} of {duration(seen.period)} from {moment(first)} to {moment(last)}; "
            f"{percent(float(present.mean()), 1)} have rows, {percent(usable, 1)} are usable in "
            f"{plural(len(seen.spans), 'span')}",
            effect="none",
            weight="stops the answer" if usable == 0 else "limits the answer" if usable < _LITTLE else "note",
        )
    ]
