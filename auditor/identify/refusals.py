"""When a log does not tell its controller: the tests, and what to say."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray
from auditor.errors import Problem
from auditor.identify import thresholds
from auditor.identify.alignment import Match, lay_out
from auditor.identify.regression import residual_of
from auditor.identify.signals import Signals
from auditor.logs.record import Record
from auditor.text import duration, percent

OWN_LAW_WORDS = (
    "the log holds only the controller's own law: the actuator is a static function of the measurement at every sample "
    "and the setpoint never moves, so that a plant without delay 'found' here would be the controller's inverse"
)

_STATE_IT = "state the controller in the loop file ([controller] gain, integral_time)"


def dead_or_copied(signals: Signals) -> Problem | None:
    """Return why the columns are no loop at all, or None; says nothing about a handful of samples."""
    good = signals.age >= 0
    if int(np.count_nonzero(good)) < thresholds.ROWS_NEEDED:
        return None
    if float(np.ptp(signals.u[good])) == 0.0:
        return _unmoved("actuator", "an actuator that moves with the error")
    if float(np.ptp(signals.y[good])) == 0.0:
        return _unmoved("measurement", "a measurement that moves")
    return _copy(signals) if np.count_nonzero(signals.moving) >= thresholds.ROWS_NEEDED else None


def too_few_rows(record: Record) -> Problem:
    """Say that the actuator is hardly ever away from its limits."""
    return Problem(
        what="too few samples to recover the controller from the log",
        where="actuator",
        found=f"fewer than {thresholds.ROWS_NEEDED} samples in automatic operation away from limits and slewing, "
        f"of {len(record)}",
        expected="a stretch of normal control, at least a few settling times long",
        do=(_likely(record) + "; " if record.log_step > 1.5 * record.period else "")
        + _STATE_IT
        + ", or give a log with more automatic operation",
    )


def after_fitting(record: Record, signals: Signals, match: Match) -> Problem | None:
    """Return why the best controller found is none, or None when it may be used."""
    left = _left_of_movement(record, signals, match)
    if left <= thresholds.UNEXPLAINED_LIMIT or _level_explained(record, signals, match):
        at_edge = abs(match.lag) == thresholds.LONGEST_SKEW and match.fit.relative > thresholds.UNEXPLAINED_LEVEL
        return _far_off(match) if at_edge else None
    return Problem(
        what="no P, PI or PID controller explains the actuator",
        where="actuator",
        found=f"the best one, a {match.terms.kind} controller, leaves {percent(min(left, 1.0))} of its movement",
        expected=f"at most {percent(thresholds.UNEXPLAINED_LIMIT)}",
        do=_likely(record) + "; " + _STATE_IT,
    )


def _level_explained(record: Record, signals: Signals, match: Match) -> bool:
    """True when the actuator's level is explained to its own noise, or to its rounding.

    What is left must look like noise: one large move inside a log (a shutdown) makes any fit leave little of the level.
    """
    if not match.levels:
        return False
    if match.fit.scale <= 0.5 * (record.u_quantum or 0.0):
        return True
    design = lay_out(signals, match.lag, match.terms, levels=True)
    rest = residual_of(design, match.fit.coefficients, np.ones(len(design.target)))
    power = float(np.mean(rest**2))
    persistence = float(np.mean(rest[1:] * rest[:-1])) / power if power > 0.0 else 0.0
    return match.fit.relative <= thresholds.UNEXPLAINED_LEVEL and persistence <= thresholds.NOISE_PERSISTENCE


def _left_of_movement(record: Record, signals: Signals, match: Match) -> float:
    """Relative residual of differences, without what rounding of the actuator alone would leave."""
    if not match.levels and match.fit.robust:
        return match.fit.relative
    design = lay_out(signals, match.lag, match.terms, levels=False)
    rest = residual_of(design, match.fit.coefficients, np.ones(len(design.target)))
    rounding = (record.u_quantum or 0.0) ** 2 / 6.0
    own = float(np.mean(design.target**2)) - rounding
    return float(np.sqrt(max(0.0, float(np.mean(rest**2)) - rounding) / own)) if own > 0 else 1.0


def _likely(record: Record) -> str:
    if record.log_step > 1.5 * record.period:
        return (
            f"likely cause: the log has a row every {duration(record.log_step)}, the loop ran every "
            f"{duration(record.period)}; log every sample"
        )
    return (
        "likely cause: the controller ran faster than the log (a cascade logged at a coarser rate), the actuator is "
        "another controller's, or the loop was not in automatic; check columns, mode and period"
    )


def _far_off(match: Match) -> Problem:
    return Problem(
        what="measurement and actuator are not on the same clock",
        where="actuator",
        found=f"they fit best {abs(match.lag)} samples apart, the largest shift tried, and "
        f"{percent(match.fit.relative)} of the actuator's movement is left",
        expected=f"a shift below {thresholds.LONGEST_SKEW} samples",
        do="check the columns' time stamps; " + _STATE_IT,
    )


def _unmoved(name: str, expected: str) -> Problem:
    return Problem(
        what=f"the {name} never moves where the loop is in automatic operation",
        where=name,
        found="one constant value",
        expected=expected,
        do="check that the right column is named, or give a log of normal operation",
    )


def _copy(signals: Signals) -> Problem | None:
    """An actuator that is the measurement itself, scaled: a wrong column, or a converted copy of it."""
    free = signals.moving
    y, u = signals.y[free], signals.u[free]
    moved = float(np.ptp(signals.r[free])) > 0
    through_origin = _left_on(y, u, constant=False)
    with_constant = _left_on(y, u, constant=True) if moved else 1.0
    if min(through_origin, with_constant) > thresholds.OWN_LAW:
        return None
    return Problem(
        what="the actuator is a copy of the measurement",
        where="actuator",
        found=f"actuator = {float(u @ y / (y @ y)):.6g} × measurement at every sample, whatever the setpoint",
        expected="the controller's output or the position of the valve, gate or pump",
        do="name the actuator's own column in the loop file",
    )


def _left_on(y: FloatArray, u: FloatArray, *, constant: bool) -> float:
    """Deviation of u from a line in y over the deviation of u."""
    columns = np.stack([y, np.ones(len(y))], axis=1) if constant else y[:, None]
    rest = u - columns @ np.linalg.lstsq(columns, u, rcond=None)[0]
    return float(np.sqrt(np.mean(rest**2)) / np.std(u))
