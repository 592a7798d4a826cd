"""What the controller does not explain of the recorded actuator, and whether it returns the record (method, §2).

Letters: y measurement, r setpoint, u actuator, e = r − y, v the controller's command before limits, rho the rest.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import minimize_scalar

from auditor.arrays import BoolArray, FloatArray, read_only
from auditor.controllers.pid import Pid
from auditor.identify import thresholds
from auditor.identify.limits import at_limit, saturates, slewing
from auditor.identify.plant import Plant
from auditor.identify.recorded import pack_form, pack_settings
from auditor.kernels.recorded import explain_span, replay_every_sample
from auditor.logs.record import Record

_FLOATING = 1e-12
"""Resolution of an actuator that is not rounded, as a share of its largest value."""

_MEMORY = 3
"""Earlier moves of the error that may explain rho: a derivative's filter forgets in about as many samples."""

_TRACKING = (0.0, 0.25, 0.5, 1.0, 2.0)
"""Tracking times tried, as shares of the integral time."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class ResidualResult:
    """What the controller says along the record.

    Attributes
    ----------
    rho : ndarray, shape (N,)
        Unexplained part of the actuator, NaN outside the spans [actuator unit].
    v : ndarray, shape (N,)
        Command before limits and without rho, NaN outside the spans [actuator unit].
    """

    rho: FloatArray
    v: FloatArray


def controller_residual(record: Record, controller: Pid) -> ResidualResult:
    """Run the controller along the record and keep what it does not explain (method, §2, null replay).

    With m = 1 from the beginning of each span (rho = 0, I = u − K e, D = 0): where the limited command v_k + rho_{k−1}
    is u_k within the actuator's resolution, rho_k = rho_{k−1}; elsewhere rho_k = u_k − v_k. Then I follows the recorded
    actuator by the controller's own anti-windup, I ← I + u_k − v_k − rho_k for back-calculation at once.

    Parameters
    ----------
    record : Record
        With the actuator already shifted to where it acts.
    controller : Pid
    """
    rho, v = np.full(len(record), np.nan), np.full(len(record), np.nan)
    pid, form = pack_settings(controller, record), pack_form(controller)
    y, r, u = (read_only(signal) for signal in (record.y, record.r, record.u))
    for span in record.spans:
        explain_span(y, r, u, span.start, span.stop, pid, form, _resolution(record), rho, v)
    return ResidualResult(rho=read_only(rho), v=read_only(v))


def null_replay(
    record: Record, controller: Pid, plant: Plant, rho: FloatArray | None = None, *, warm_up: int = 0
) -> float:
    """Replay the record with an update at every sample and return std(replay − record) / std(error).

    Parameters
    ----------
    record : Record
    controller : Pid
    plant : Plant
        Filters only the difference between replayed and recorded actuator (2.1).
    rho : ndarray, shape (N,), optional
        Unexplained part of the actuator to inject [actuator unit].
    warm_up : int
        Samples at the beginning of each span that are replayed and not counted: a derivative starts there at zero,
        whatever it was in the record. Spans too short for it count whole.

    Returns
    -------
    float
        0 when the record comes back; infinite when the replay diverges or the error never moves.
    """
    away = _null_deviation(record, controller, plant, rho)
    counted = np.zeros(len(record), dtype=np.bool_)
    for span in record.spans:
        counted[span.start + (warm_up if len(span) > 2 * warm_up else 0) : span.stop] = True
    away, deviation = away[counted], record.error_deviation
    if len(away) == 0 or not np.all(np.isfinite(away)):
        return math.inf
    if not np.any(away):
        return 0.0
    if deviation == 0.0 or float(np.max(np.abs(away))) > thresholds.DIVERGED * deviation:
        return math.inf
    return float(np.std(away)) / deviation


def unexplained_movement(record: Record, controller: Pid) -> float:
    """Return the mean movement of rho per sample [actuator unit]: 0 for the right controller on an exact log."""
    moved = np.abs(moves(controller_residual(record, controller).rho)[within(record)])
    return float(np.mean(moved)) if len(moved) else 0.0


def anti_windup_of(record: Record, controller: Pid) -> Pid:
    """Return the controller with the anti-windup that explains most of the actuator; needs no plant.

    A controller that never meets a limit keeps its own.
    """
    if not saturates(record) or not math.isfinite(controller.integral_time):
        return controller
    own = unexplained_movement(record, controller)
    best = min(_schemes(controller), key=lambda scheme: unexplained_movement(record, scheme))
    best = best if controller.tracking_time > 0 else _sharpened(record, best)
    # Schemes that explain equally much differ by rounding only.
    floor = thresholds.SCHEME_BETTER * own - _resolution(record) / len(record)
    return best if unexplained_movement(record, best) < floor else controller


def choose_anti_windup(record: Record, controller: Pid, plant: Plant, *, warm_up: int = 0) -> Pid:
    """Return the controller with the anti-windup of the smallest null replay, its own when it never meets a limit.

    Parameters
    ----------
    warm_up : int
        As in `null_replay`: a span that begins at a limit begins with a wrong integral under every scheme.
    """
    if not saturates(record) or not math.isfinite(controller.integral_time):
        return controller
    candidates = [controller, anti_windup_of(record, controller), *_schemes(controller)]
    return min(candidates, key=lambda s: max(thresholds.NOTHING_LEFT, null_replay(record, s, plant, warm_up=warm_up)))


def explained_by_error(rho: FloatArray, record: Record) -> float:
    """Return the share of rho's movement that the error, its sum and declared disturbances account for, 0…1.

    Differences are compared (of rho with those of e, e itself and those of w): rho and the sum of e both wander, and
    two wandering series explain each other by chance. The error's three moves before let a derivative take part.
    Samples at a limit or slewing, and those right after, are left out: rho is held there. Wrong gains alone give 1.
    What is left is also held against the actuator's own movement: far too large gains make a rho that is hardly
    anything but the error, of an actuator that has nothing to do with it.
    """
    moved = moves(record.e)
    before = [np.concatenate([np.full(lag, np.nan), moved[: len(moved) - lag]]) for lag in range(1, _MEMORY + 1)]
    columns = [moved, record.e, *before, *(moves(w) for w in record.w)]
    return min(_share(rho, record, columns, moves(record.u)), _share(rho, record, columns))


def explained_by_disturbances(rho: FloatArray, record: Record) -> float:
    """Return the share of rho's movement that declared disturbances alone account for, 0…1."""
    return _share(rho, record, [moves(w) for w in record.w])


def moves(signal: FloatArray) -> FloatArray:
    """Return signal[k] − signal[k − 1], NaN at the first sample, shape (N,)."""
    return np.diff(signal, prepend=np.nan)


def within(record: Record) -> BoolArray:
    """True where this sample and the one before belong to one span, shape (N,)."""
    inside = record.in_span
    for span in record.spans:
        inside[span.start] = False
    return inside


def _share(rho: FloatArray, record: Record, columns: Sequence[FloatArray], whole: FloatArray | None = None) -> float:
    """One less the power of rho's movement that the columns leave, over that of `whole` (rho's movement itself)."""
    held = at_limit(record) | slewing(record)
    usable = within(record) & ~held & ~np.concatenate([[True], held[:-1]])
    target = moves(rho)
    for column in (target, *columns):
        usable &= np.isfinite(column)
    target = target[usable]
    power = float(np.sum((target if whole is None else whole[usable]) ** 2))
    if power == 0.0 or not columns:
        return 0.0
    table = np.stack([column[usable] for column in columns], axis=1)
    size = np.sqrt(np.sum(table**2, axis=0))
    size[size == 0] = 1.0
    rest = target - (table / size) @ np.linalg.lstsq(table / size, target, rcond=None)[0]
    return max(0.0, 1.0 - float(rest @ rest) / power)


def _null_deviation(record: Record, controller: Pid, plant: Plant, rho: FloatArray | None) -> FloatArray:
    """ỹ − y, zero outside the spans, shape (N,)."""
    replayed = record.y.copy()
    injected = read_only(np.zeros(len(record)) if rho is None else rho)
    pid, form = pack_settings(controller, record), pack_form(controller)
    y, r, u = (read_only(signal) for signal in (record.y, record.r, record.u))
    A, B0, B1, C = (read_only(np.asarray(matrix, dtype=float)) for matrix in (plant.A, plant.B0, plant.B1, plant.C))
    for span in record.spans:
        replay_every_sample(
            y,
            r,
            u,
            injected,
            span.start,
            span.stop,
            A,
            B0,
            B1,
            C,
            plant.delay,
            record.y_quantum or 0.0,
            pid,
            form,
            replayed,
        )
    return np.where(record.in_span, replayed - record.y, 0.0)


def _resolution(record: Record) -> float:
    inside = np.abs(record.u[record.in_span])
    return max(record.u_quantum or 0.0, _FLOATING * float(np.max(inside, initial=0.0)))


def _schemes(controller: Pid) -> list[Pid]:
    """Every anti-windup; a tracking time that was stated is not searched."""
    stated = controller.tracking_time > 0
    times = [controller.tracking_time] if stated else [share * abs(controller.integral_time) for share in _TRACKING]
    back = [replace(controller, anti_windup="back-calculation", tracking_time=time) for time in times]
    return [*back, *(replace(controller, anti_windup=name, tracking_time=0.0) for name in ("freeze", "none"))]


def _sharpened(record: Record, controller: Pid) -> Pid:
    """Search the tracking time around the one found, where there is one and the log is not explained yet."""
    if controller.anti_windup != "back-calculation" or controller.tracking_time == 0.0:
        return controller

    def left(log_time: float) -> float:
        return unexplained_movement(record, replace(controller, tracking_time=math.exp(log_time)))

    middle = math.log(controller.tracking_time)
    found = minimize_scalar(left, bounds=(middle - 1.0, middle + 1.0), method="bounded", options={"xatol": 1e-9})
    better = found.fun < unexplained_movement(record, controller)
    return replace(controller, tracking_time=math.exp(float(found.x))) if better else controller
