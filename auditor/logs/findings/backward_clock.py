"""Stamps that go back: rows recorded late, or a clock that was set back and ran over a stretch twice."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import moment, plural
from auditor.logs.runs import runs_of
from auditor.text import duration


def find(seen: Evidence) -> list[Finding]:
    """Report where the stamps, as recorded, go back."""
    time = seen.recorded
    back = np.flatnonzero(time[1:] < time[:-1])
    if len(back) == 0:
        return []
    step = (time[back] - time[back + 1]) / 1e9
    largest = int(np.argmax(step))
    twice = int(seen.overlapped.sum())
    return [
        Finding(
            kind="backward-clock",
            start=int(time[back + 1].min()),
            end=int(time[back].max()),
            count=len(back),
            detail=f"the stamps go back {plural(len(back), 'time')}, at most by {duration(float(step[largest]))} "
            f"at {moment(int(time[back[largest]]))}" + _stretches(seen, twice),
            effect="rows put in order of time" + _not_used(twice),
            weight="limits the answer" if twice else "note",
        )
    ]


def _stretches(seen: Evidence, twice: int) -> str:
    """Say how many stretches were run over twice."""
    if twice == 0:
        return ""
    stretches = len(runs_of(seen.overlapped)[0])
    return f"; the clock ran over {plural(stretches, 'stretch')} twice"


def _not_used(twice: int) -> str:
    """Say what happened to those."""
    return f"; {plural(twice, 'stamp')} of these not used, as rows of two different times alternate" if twice else ""
