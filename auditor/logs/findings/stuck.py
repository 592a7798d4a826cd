"""A measurement that stands still far longer than it usually does."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.series import as_stored, at_rest, runs_of_one_value
from auditor.logs.findings.wording import moment, plural
from auditor.text import duration, percent

_LONGEST_USUAL = 0.99
_TIMES_USUAL = 10
_FEWEST = 20
_MUCH = 0.01


def stuck_runs(values: FloatArray) -> tuple[IntArray, IntArray]:
    """Return first and last index of the runs of one value that are far longer than usual.

    Usual is the 99th percentile of all runs but the longest: 1 for a signal of full resolution, more for a rounded
    or exception-reported one, so that neither is called stuck for what it is.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Finite values in the order they were stored.
    """
    none = np.empty(0, dtype=np.int64)
    moved = values[1:] != values[:-1]
    if len(moved) - np.sum(moved) < _FEWEST:
        return none, none
    starts, lengths = runs_of_one_value(values)
    free = ~at_rest(values[starts], lengths, _FEWEST)
    starts, lengths = starts[free], lengths[free]
    others = np.sort(lengths)[:-1]
    usual = float(np.quantile(others, _LONGEST_USUAL)) if len(others) else 1.0
    long = lengths > max(_FEWEST, _TIMES_USUAL * usual)
    return starts[long], starts[long] + lengths[long] - 1


def find(seen: Evidence) -> list[Finding]:
    """Report the stretches over which the measurement stands still."""
    trace = seen.trace("measurement")
    if trace.constant:
        return []
    values, stamps = as_stored(trace, seen)
    first, last = stuck_runs(values)
    if len(first) == 0:
        return []
    lasting = (stamps[last] - stamps[first]) / 1e9
    longest = int(np.argmax(lasting))
    share = float((last - first + 1).sum()) / len(values)
    return [
        Finding(
            kind="stuck",
            start=int(stamps[first[0]]),
            end=int(stamps[last[-1]]),
            count=len(first),
            detail=f"the measurement stands still {plural(len(first), 'time')}, {percent(share, 1)} of the values, the "
            f"longest {duration(float(lasting[longest]))} at {values[first[longest]]:g} {trace.unit}".rstrip()
            + f" from {moment(int(stamps[first[longest]]))}",
            effect="none, kept as recorded: it is what the controller saw; exclude it if the sensor was dead",
            signal=trace.name,
            weight="stops the answer" if share > 1 - _MUCH else "limits the answer" if share > _MUCH else "note",
        )
    ]
