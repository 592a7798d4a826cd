"""Where the actuator is free: away from its limits, not slewing, and recorded."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from auditor.arrays import BoolArray
from auditor.identify import thresholds
from auditor.logs.record import Record

_RUN = 3
"""Samples in a row at its own extreme before an actuator without a stated limit counts as limited."""


def at_limit(record: Record) -> BoolArray:
    """True where the actuator is at a stated limit or visibly stuck at its own extreme, shape (N,)."""
    slack = _slack(record)
    with np.errstate(invalid="ignore"):
        stated = (record.u >= record.high - slack) | (record.u <= record.low + slack)
    return np.asarray(stated | stuck_at_extreme(record))


def stuck_at_extreme(record: Record) -> BoolArray:
    """True where u rests at its highest or lowest value for `_RUN` samples or more while the error moves, shape (N,).

    A rounded actuator rests everywhere, so nothing is said about one.
    """
    stuck = np.zeros(len(record), dtype=np.bool_)
    if record.u_quantum is not None or not record.in_span.any():
        return stuck
    u = np.where(record.in_span, record.u, np.nan)
    for extreme in (np.nanmax(u), np.nanmin(u)):
        stuck |= _long_runs(u == extreme, _RUN)
    moving = np.abs(np.diff(record.e, prepend=np.nan)) > 0
    return stuck if bool(np.any(moving & stuck)) else np.zeros(len(record), dtype=np.bool_)


def slewing(record: Record) -> BoolArray:
    """True where the actuator moves as fast as it may, shape (N,)."""
    step = record.max_rate * record.period
    nearly = max(0.5 * step, step * (1 - 1e-9) - 0.5 * (record.u_quantum or 0.0))
    moves = np.abs(np.diff(record.u, prepend=np.nan))
    with np.errstate(invalid="ignore"):
        return np.asarray(moves >= nearly)


def dead(record: Record) -> BoolArray:
    """True where measurement, setpoint and actuator all rest for `DEAD_RUN` samples or more, shape (N,)."""
    resting = np.ones(len(record), dtype=np.bool_)
    for signal in (record.y, record.r, record.u):
        resting &= np.diff(signal, prepend=np.nan) == 0
    return _long_runs(resting, thresholds.DEAD_RUN)


def saturates(record: Record) -> bool:
    """Tell whether the actuator is ever at a limit inside the spans."""
    return bool(np.any(at_limit(record) & record.in_span))


def _slack(record: Record) -> float:
    width = record.high - record.low
    return max(0.5 * (record.u_quantum or 0.0), 1e-9 * (width if np.isfinite(width) else 0.0))


def longest_run(mask: BoolArray) -> int:
    """Return the number of samples of the longest run of True."""
    return max((stop - start for start, stop in _runs(mask)), default=0)


def _long_runs(mask: BoolArray, shortest: int) -> BoolArray:
    """Keep runs of True of at least `shortest` samples."""
    kept = np.zeros(len(mask), dtype=np.bool_)
    for start, stop in _runs(mask):
        kept[start:stop] = stop - start >= shortest
    return kept


def _runs(mask: BoolArray) -> Iterator[tuple[int, int]]:
    edges = np.flatnonzero(np.diff(np.concatenate(([0], mask.astype(np.int8), [0])))).tolist()
    return zip(edges[::2], edges[1::2], strict=True)
