"""One column of the log made one usable value per stamp, and one per instant of the grid."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
import pandas as pd

from auditor.arrays import BoolArray, FloatArray
from auditor.logs.findings.evidence import ABSENT, CONFLICT, EMPTY, OUTSIDE, SENTINEL, USABLE, Trace
from auditor.logs.findings.exception_reported import archive_deadband
from auditor.logs.findings.quantised import quantum
from auditor.logs.findings.sentinel import sentinel_mask
from auditor.logs.grid import Grid, any_at, comes_evenly, last_at
from auditor.logs.log import Log
from auditor.logs.order import Order
from auditor.logs.runs import hold
from auditor.loop import Signal

_LARGEST = 1e100
"""Numbers from here on are no values: their squares leave the range of doubles."""

_FEWEST_LEVELS = {"setpoint": 10}


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Column:
    """One value per stamp, shapes (M,).

    `broken` marks stamps at which a held value ends, `own` those at which the column has a row (None: all of them).
    """

    signal: Signal
    role: str
    values: FloatArray
    spoiled: Mapping[str, BoolArray]
    removed: Mapping[str, FloatArray]
    broken: BoolArray
    own: BoolArray | None = None


def read_column(log: Log, order: Order, signal: Signal, role: str) -> Column:
    """Return the usable engineering values of a signal per stamp, and what was not used."""
    raw = order.arrange(log.channels[str(signal.column)])
    bad = ~(np.abs(raw) < _LARGEST)
    sentinel = sentinel_mask(raw, role == "measurement" and signal.low is None and signal.high is None)
    values = np.where(bad | sentinel, np.nan, raw) if bad.any() or sentinel.any() else raw
    if signal.scale != 1.0 or signal.offset != 0.0:
        values = signal.scale * values + signal.offset
    outside = _outside(values, signal, role)
    removed = {"sentinel": raw[sentinel], "outside": values[outside]}
    values, conflict = order.merge(np.where(outside, np.nan, values) if outside.any() else values)
    if order.overlapped.any():
        values = np.where(order.overlapped, np.nan, values)
    absent, own = np.isnan(values), _own_rows(log, order, signal)
    spoiled = {
        "conflict": conflict & ~order.overlapped,
        "sentinel": order.any_of(sentinel) & absent,
        "outside": order.any_of(outside) & absent,
        "overlap": order.overlapped,
    }
    spoiled["empty"] = absent & ~np.logical_or.reduce(list(spoiled.values())) & (True if own is None else own)
    broken = np.logical_or.reduce([spoiled[k] for k in ("conflict", "sentinel", "outside", "overlap")])
    return Column(
        signal=signal,
        role=role,
        values=values,
        spoiled=spoiled,
        removed=removed,
        broken=broken | _text_states(log, order, signal),
        own=own,
    )


def _own_rows(log: Log, order: Order, signal: Signal) -> BoolArray | None:
    """Return True at stamps at which a signal with rows of its own has one; None when all rows are."""
    own = log.own.get(str(signal.column))
    return None if own is None else order.any_of(order.arrange(own))


def _outside(values: FloatArray, signal: Signal, role: str) -> BoolArray:
    """Return True where a value is outside its plausible range; an actuator's low and high are its limits instead."""
    outside = np.zeros(len(values), dtype=np.bool_)
    if role == "actuator":
        return outside
    with np.errstate(invalid="ignore"):
        if signal.low is not None:
            outside |= values < signal.low
        if signal.high is not None:
            outside |= values > signal.high
    return outside


def _text_states(log: Log, order: Order, signal: Signal) -> BoolArray:
    """Return True at stamps where a number column held a text such as "Bad"."""
    cells = log.texts.get(str(signal.column))
    if cells is None:
        return np.zeros(len(order.stamps), dtype=np.bool_)
    return order.any_of(order.arrange(pd.notna(cells)))


def constant_trace(signal: Signal, role: str, grid: Grid) -> Trace:
    """Return the trace of a signal that is a number in the loop file."""
    level = 0.0 if signal.value is None else signal.value
    return Trace(
        role=role,
        name=role,
        unit=signal.unit,
        values=np.empty(0),
        state=np.full(grid.count, USABLE, dtype=np.int8),
        sampled=np.full(grid.count, level),
        resolution=signal.resolution,
        quantum=signal.resolution,
        constant=True,
    )


def sample(column: Column, grid: Grid) -> Trace:
    """Put a column on the grid and say how its values are stored."""
    signal, role = column.signal, column.role
    held = signal.stored == "on-change" or (role in ("setpoint", "disturbance") and signal.stored != "every")
    at_instants = last_at(column.values, grid)
    broken = any_at(column.broken, grid) if held and role != "setpoint" and column.broken.any() else None
    trace = Trace(
        role=role,
        name=str(signal.column),
        unit=signal.unit,
        values=column.values,
        state=_state(column, grid),
        sampled=hold(at_instants, None if held else grid.window, broken),
        spoiled=column.spoiled,
        removed=column.removed,
        held=held,
        stored=signal.stored,
        low=signal.low,
        high=signal.high,
        resolution=signal.resolution,
    )
    return _with_storage(trace, at_instants, grid)


def _state(column: Column, grid: Grid) -> npt.NDArray[np.int8]:
    """Return the best each instant has; a slower log's row speaks for the instants up to the next one."""
    state = np.full(grid.count, ABSENT, dtype=np.int8)
    state[grid.instant if column.own is None else grid.instant[column.own]] = EMPTY
    for kind, code in (("overlap", CONFLICT), ("conflict", CONFLICT), ("sentinel", SENTINEL), ("outside", OUTSIDE)):
        mask = column.spoiled[kind]
        if mask.any():
            state[grid.instant[mask]] = code
    there = np.isfinite(column.values)
    state[grid.instant[there]] = USABLE
    if grid.window == 1:
        return state
    spread = hold(np.where(state == ABSENT, np.nan, state.astype(np.float64)), grid.window)
    return np.nan_to_num(spread, nan=ABSENT).astype(np.int8)


def _with_storage(trace: Trace, at_instants: FloatArray, grid: Grid) -> Trace:
    """Add the step and the dead-band with which a signal is stored."""
    step = trace.resolution or quantum(trace.values, _FEWEST_LEVELS.get(trace.role, 4))
    if trace.role not in ("measurement", "actuator"):
        return replace(trace, quantum=step)
    return replace(trace, quantum=step, deadband=archive_deadband(stored_series(trace, at_instants, grid), step))


def stored_series(trace: Trace, at_instants: FloatArray, grid: Grid) -> FloatArray:
    """Return the values in the order an archive would have seen them.

    Where the rows do not come evenly the archive may have stored changes only, and the values are held between rows;
    else the rows themselves tell, whatever the log's spacing.
    """
    there = np.isfinite(trace.values)
    if trace.held or not comes_evenly(grid.instant[there]):
        return hold(at_instants)
    return trace.values[there]
