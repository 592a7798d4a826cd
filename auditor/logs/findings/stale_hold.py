"""A measurement that stands still for a few rows while the actuator goes on: old values repeated."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.findings.jumps import excursions_of
from auditor.logs.findings.series import as_stored, at_rest, runs_of_one_value, usual_run
from auditor.logs.findings.wording import moment, plural
from auditor.text import duration, percent

_SHORTEST = 4
_TIMES_USUAL = 5
_STUCK = 20
_STUCK_TIMES_USUAL = 10
_FEWEST_RUNS = 50
_MOVING = 0.5
_MUCH = 0.01


def stale_runs(values: FloatArray) -> tuple[IntArray, IntArray]:
    """Return first and last index of the runs of one value that are longer than usual, but not `stuck`.

    Usual is the 99th percentile of the runs. Four equal values are never chance in a signal of full resolution; in a
    rounded or held one, whose runs get rarer by a constant factor per row, five times the usual is.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Finite values in the order they were stored.
    """
    starts, lengths = runs_of_one_value(values)
    if len(starts) < _FEWEST_RUNS:
        return starts[:0], starts[:0]
    usual = usual_run(values)
    least = _SHORTEST if usual <= 1 else max(_SHORTEST, _TIMES_USUAL * usual)
    chosen = (lengths >= least) & (lengths <= max(_STUCK, _STUCK_TIMES_USUAL * usual))
    chosen &= ~at_rest(values[starts], lengths, least)
    return starts[chosen], starts[chosen] + lengths[chosen] - 1


def find(seen: Evidence) -> list[Finding]:
    """Report such holds of the measurement during which the actuator moves."""
    trace = seen.trace("measurement")
    if trace.constant or trace.held or trace.deadband is not None:
        return []
    values, stamps = as_stored(trace, seen)
    first, last = stale_runs(values)
    if len(first) == 0:
        return []
    chosen = _while_moving(seen, stamps, first, last) & ~np.isin(first, excursions_of(trace, seen)[0].first)
    first, last = first[chosen], last[chosen]
    return [_told(trace, values, stamps, first, last)] if len(first) else []


def _while_moving(seen: Evidence, stamps: IntArray, first: IntArray, last: IntArray) -> BoolArray:
    """Return True where the actuator moves during a hold, and at least half as often as it usually does."""
    actuator = seen.trace("actuator")
    if actuator.constant:
        return np.zeros(len(first), dtype=np.bool_)
    stored, at = as_stored(actuator, seen)
    moves = at[1:][stored[1:] != stored[:-1]]
    during = np.searchsorted(moves, stamps[last], "right") - np.searchsorted(moves, stamps[first], "right")
    usually = len(moves) / max(1, len(stored)) * (last - first)
    return np.asarray(during >= np.maximum(1.0, _MOVING * usually))


def _told(trace: Trace, values: FloatArray, stamps: IntArray, first: IntArray, last: IntArray) -> Finding:
    """Say how many there are and which is the longest."""
    lasting = (stamps[last] - stamps[first]) / 1e9
    longest = int(np.argmax(lasting))
    share = float((last - first).sum()) / len(values)
    return Finding(
        kind="stale-hold",
        start=int(stamps[first[0]]),
        end=int(stamps[last[-1]]),
        count=len(first),
        detail=f"the measurement repeats an old value {plural(len(first), 'time')} while the actuator moves, "
        f"{percent(share, 2)} of the values, the longest {duration(float(lasting[longest]))} at "
        f"{values[first[longest]]:g} {trace.unit}".rstrip()
        + f" from {moment(int(stamps[first[longest]]))}",
        effect="none, kept as recorded; a repeated value is no sample, and no threshold rule sends meanwhile: if the "
        "archive can tell, give these rows no value",
        signal=trace.name,
        weight="limits the answer" if share > _MUCH else "note",
    )
