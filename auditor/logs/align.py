"""Log + findings → `Record`: the log on the loop's own clock, nothing averaged, nothing interpolated."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray, read_only
from auditor.errors import LogError, raise_all
from auditor.logs.findings import Evidence, look
from auditor.logs.findings.evidence import EXCLUDED, MANUAL, Trace
from auditor.logs.fitness import column_problems, period_problems, require_usable, roles_of
from auditor.logs.grid import Grid, lay_grid, typical_spacing
from auditor.logs.log import Log
from auditor.logs.modes import read_modes
from auditor.logs.order import Order, put_in_order
from auditor.logs.reader import read_log
from auditor.logs.record import Record, Span
from auditor.logs.runs import hold
from auditor.logs.spans import bridge_samples, causes, held_inside, inside, lost_hours, spans_of
from auditor.logs.traces import Column, constant_trace, read_column, sample
from auditor.loop import Loop, Signal
from auditor.progress import Progress, silent

__all__ = ["align", "read_record", "require_usable"]


def read_record(loop: Loop, observe: Progress = silent) -> Record:
    """Read the log a loop file names and align it.

    Parameters
    ----------
    loop : Loop
    observe : Progress, optional
        Told how much of the reading is done.

    Returns
    -------
    Record

    Raises
    ------
    LogError
        When the log cannot be read as the loop file describes it, or does not fit its period.
    """
    return align(read_log(loop, observe), loop)


def align(log: Log, loop: Loop) -> Record:
    """Bring a log to the loop's base period.

    Rows are put in order of time, equal stamps brought together, and stamps snapped to ``start + k·period``. Every
    sample takes the last usable value at or before its instant, no older than one period (one log step where the log
    is slower). A setpoint, and any signal stored on change, stands until its next stored value.

    Parameters
    ----------
    log : Log
    loop : Loop

    Returns
    -------
    Record
        Holes of at most two periods are held; `auditor.logs.spans.bridge` holds longer ones.

    Raises
    ------
    LogError
        When a column is missing, there are fewer than two stamps, or the period does not fit the stamps.
    """
    raise_all(LogError, column_problems(log, loop))
    order = put_in_order(log.time, _measured(log, loop))
    columns = {role: _column(log, order, signal, role) for role, signal in roles_of(loop).items()}
    others = [_column(log, order, signal, "disturbance") for signal in loop.signals.disturbances]
    grid = _grid(order, columns["measurement"], columns["actuator"], loop)
    traces = [_trace(columns[role], signal, role, grid) for role, signal in roles_of(loop).items()]
    pairs = zip(others, loop.signals.disturbances, strict=True)
    traces += [_trace(column, signal, "disturbance", grid) for column, signal in pairs]
    manual, modes, unmet = _manual(log, loop, order, grid)
    excluded = _excluded(loop, grid)
    cause = causes(traces[0], traces[1], traces[2], manual, excluded)
    samples = bridge_samples(loop.period, 0.0)
    spans = spans_of(cause == 0, samples, cut=(cause == MANUAL) | (cause == EXCLUDED))
    marks = _Marks(
        manual=manual,
        modes=modes,
        unmet=unmet,
        excluded=excluded,
        cause=cause,
        spans=spans,
        bridge=samples * loop.period,
    )
    seen = _evidence(log, loop, order, grid, traces, marks)
    return _record(log, loop, grid, seen, spans)


def _measured(log: Log, loop: Loop) -> BoolArray:
    """Return True for the rows that carry a measurement."""
    name = loop.signals.measurement.column
    return np.ones(len(log.time), dtype=np.bool_) if name is None else np.isfinite(log.channels[name])


def _column(log: Log, order: Order, signal: Signal, role: str) -> Column | None:
    """Return a signal per stamp, None for one that is a number in the loop file."""
    return None if signal.column is None else read_column(log, order, signal, role)


def _trace(column: Column | None, signal: Signal, role: str, grid: Grid) -> Trace:
    """Return a signal on the grid."""
    return constant_trace(signal, role, grid) if column is None else sample(column, grid)


def _grid(order: Order, measurement: Column | None, actuator: Column | None, loop: Loop) -> Grid:
    """Lay the grid through the stamps, after seeing that the period fits them."""
    on_change = loop.signals.measurement.stored == "on-change"
    beats = order.stamps
    if measurement is not None and not on_change:
        beats = _stamps_where(order.stamps, np.isfinite(measurement.values))
    if len(beats) < 2:
        beats = order.stamps
    raise_all(LogError, period_problems(order.stamps, beats, loop.period))
    moves = _moves(order, actuator) if typical_spacing(beats) < loop.period else beats[:0]
    return lay_grid(order.stamps, beats, moves, loop.period, on_change)


def _stamps_where(stamps: IntArray, mask: BoolArray) -> IntArray:
    """Return the marked stamps, without a copy when all are."""
    return stamps if mask.all() else stamps[mask]


def _moves(order: Order, actuator: Column | None) -> IntArray:
    """Return the stamps at which the actuator has a new value."""
    if actuator is None:
        return np.empty(0, dtype=np.int64)
    there = np.isfinite(actuator.values)
    values, stamps = actuator.values[there], _stamps_where(order.stamps, there)
    return np.asarray(stamps[1:][values[1:] != values[:-1]])


def _manual(log: Log, loop: Loop, order: Order, grid: Grid) -> tuple[BoolArray, Mapping[str, int], tuple[str, ...]]:
    """Return where the loop was not in automatic, the modes met, and the stated ones when none of them was."""
    mode = loop.signals.mode
    if mode is None:
        return np.zeros(grid.count, dtype=np.bool_), MappingProxyType({}), ()
    cells = log.texts[mode.column] if mode.column in log.texts else log.channels[mode.column]
    return read_modes(cells, mode.automatic, order, grid)


def _excluded(loop: Loop, grid: Grid) -> BoolArray:
    """Return True inside the owner's exclusions, both ends included."""
    mask = np.zeros(grid.count, dtype=np.bool_)
    per_sample = grid.period * 1e9
    for stretch in loop.log.exclude:
        first = int(np.ceil((stretch.start - grid.start) / per_sample - 1e-6))
        last = int(np.floor((stretch.end - grid.start) / per_sample + 1e-6))
        mask[max(0, first) : max(0, last + 1)] = True
    return mask


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class _Marks:
    """What was decided about each sample; see `Evidence`."""

    manual: BoolArray
    modes: Mapping[str, int]
    unmet: tuple[str, ...]
    excluded: BoolArray
    cause: npt.NDArray[np.int8]
    spans: tuple[Span, ...]
    bridge: float


def _evidence(log: Log, loop: Loop, order: Order, grid: Grid, traces: list[Trace], marks: _Marks) -> Evidence:
    """Lay everything before the checks."""
    return Evidence(
        recorded=log.time[~np.isin(log.time, order.stray)] if len(order.stray) else log.time,
        stray=order.stray,
        stamps=order.stamps,
        repeated=order.repeated,
        overlapped=order.overlapped,
        instant=grid.instant,
        beats=grid.beats,
        unevenness=grid.unevenness,
        unit=grid.unit,
        period=grid.period,
        log_step=grid.log_step,
        tolerance=grid.tolerance,
        regular=grid.regular,
        phase_from=grid.phase_from,
        start=grid.start,
        traces=tuple(traces),
        manual=marks.manual,
        excluded=marks.excluded,
        modes=marks.modes,
        unmet=marks.unmet,
        reasons=tuple(stretch.why for stretch in loop.log.exclude),
        cause=marks.cause,
        spans=np.array([(span.start, span.stop) for span in marks.spans], dtype=np.int64).reshape(-1, 2),
        bridge=marks.bridge,
    )


def _record(log: Log, loop: Loop, grid: Grid, seen: Evidence, spans: tuple[Span, ...]) -> Record:
    """Freeze the result."""
    within = inside(spans, grid.count)
    y, r, u = (held_inside(trace.sampled, within) for trace in seen.traces[:3])
    measurement, setpoint, actuator = seen.traces[:3]
    stated = loop.signals.actuator
    return Record(
        period=grid.period,
        start=grid.start,
        y=read_only(y),
        r=read_only(r),
        u=read_only(u),
        w=read_only(_disturbances(seen.traces[3:], grid.count)),
        valid=read_only(seen.cause == 0),
        spans=spans,
        y_quantum=measurement.quantum,
        u_quantum=actuator.quantum,
        r_quantum=setpoint.quantum,
        y_deadband=measurement.deadband,
        log_step=grid.log_step,
        low=-np.inf if stated.low is None else stated.low,
        high=np.inf if stated.high is None else stated.high,
        max_rate=np.inf if stated.max_rate is None else stated.max_rate,
        findings=log.findings + look(seen),
        lost_hours=lost_hours(seen.cause, spans, grid.period),
        rows=log.rows or len(log.time),
        inputs=log.inputs,
        zone=log.zone,
        cause=read_only(seen.cause),
    )


def _disturbances(traces: tuple[Trace, ...], count: int) -> FloatArray:
    """Return the disturbances, shape (n_w, N), held through holes; before its first value each has that one."""
    w = np.empty((len(traces), count))
    for row, trace in zip(w, traces, strict=True):
        held = trace.sampled if trace.held else hold(trace.sampled)
        there = np.flatnonzero(np.isfinite(held))
        row[:] = np.where(np.isfinite(held), held, held[there[0]] if len(there) else 0.0)
    return w
