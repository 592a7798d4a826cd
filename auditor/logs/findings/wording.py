"""How findings speak of times and of many spells at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray
from auditor.logs.findings.evidence import Evidence
from auditor.logs.runs import runs_of
from auditor.text import duration


def moment(time: int) -> str:
    """Write a time [ns since 1970 UTC] as RFC 3339 to the second, finer only where it is needed."""
    unit = "s" if time % 1_000_000_000 == 0 else "ms"
    return f"{np.datetime64(int(time), 'ns').astype(f'datetime64[{unit}]')}Z"


def plural(count: int, noun: str) -> str:
    """Write a count with its noun."""
    ending = "" if count == 1 else "es" if noun.endswith("ch") else "s"
    return f"{count} {noun}{ending}"


@dataclass(frozen=True, slots=True, kw_only=True)
class Spells:
    """The runs of True of a mask on the grid, in the numbers a finding needs (times in ns, durations in s)."""

    count: int
    samples: int
    start: int
    end: int
    total: float
    longest: float
    longest_at: int

    def told(self, noun: str) -> str:
        """Say how many there are, how long in all, and which is the longest."""
        text = f"{plural(self.count, noun)}, {duration(self.total)} in all"
        if self.count > 1:
            text += f", the longest {duration(self.longest)} from {moment(self.longest_at)}"
        return text


def spells_of(mask: BoolArray, seen: Evidence) -> Spells | None:
    """Sum up the runs of True of a mask on the grid, shape (N,); None when there are none."""
    starts, stops = runs_of(mask)
    if len(starts) == 0:
        return None
    lengths = stops - starts
    longest = int(np.argmax(lengths))
    return Spells(
        count=len(starts),
        samples=int(lengths.sum()),
        start=seen.time_at(int(starts[0])),
        end=seen.time_at(int(stops[-1]) - 1),
        total=float(lengths.sum()) * seen.period,
        longest=float(lengths[longest]) * seen.period,
        longest_at=seen.time_at(int(starts[longest])),
    )
