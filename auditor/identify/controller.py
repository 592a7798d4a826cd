"""The controller of the loop: from its file, from the log, and when from neither.

`recover_controller` says which sample of the actuator belongs to which error, what the controller's settings are, and
whether the actuator is explained by them at all. What follows from it is in `residual` (null replay) and `causes`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from auditor.controllers.pid import INTEGRALS, Pid
from auditor.errors import Problem
from auditor.identify import refusals, thresholds
from auditor.identify.alignment import LAGS, Match, best_match, lay_out, setpoint_moves, shift_actuator, skew_words
from auditor.identify.coarse import on_row_clock, rows_apart
from auditor.identify.gains import coefficients_of, controller_of, roundest, stated_controller, terms_of
from auditor.identify.limits import saturates
from auditor.identify.regression import measured, residual_of
from auditor.identify.residual import anti_windup_of
from auditor.identify.signals import Signals, read_signals
from auditor.logs.record import Record
from auditor.loop import ControllerSettings, Loop
from auditor.text import duration, number

_ROUNDING = 1e-11
"""Relative residual of floating point."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Recovery:
    """The controller that made the record.

    Attributes
    ----------
    controller : Pid
        With the record's limits; not to be used when `usable` is False.
    source : str
        "file" or "log".
    skew_samples : int
        Samples by which the actuator's column is late (+) or early (−); give it to `shift_actuator`.
    relative_residual : float
        What the controller leaves of the actuator's own movement: 0 for an exact log, 1 for nothing explained.
    lag_table : tuple of (int, float)
        Relative residual at every shift tried, for the shift found on the same terms.
    reasons : tuple of str
        What people should know about how it was found.
    usable : bool
    refusal : Problem or None
        What to tell when it is not usable.
    own_law : bool
        True when the actuator is a static function of the measurement and the setpoint never moves: the log then
        holds the controller's law and nothing that tells about the plant.
    bias : float or None
        Actuator at zero error, of a controller without integral action [actuator unit].
    """

    controller: Pid
    source: str
    skew_samples: int
    relative_residual: float
    lag_table: tuple[tuple[int, float], ...]
    reasons: tuple[str, ...] = ()
    usable: bool = True
    refusal: Problem | None = None
    own_law: bool = False
    bias: float | None = None


def recover_controller(record: Record, loop: Loop) -> Recovery:
    """Find the controller, its integral form and anti-windup, and the skew of the actuator's column.

    Parameters
    ----------
    record : Record
        As logged; the actuator is not shifted here.
    loop : Loop
        Gains come from its file where it has a controller; what the file leaves open is found in the record.

    Returns
    -------
    Recovery
        With `usable` False and a `refusal` when nothing explains the actuator.
    """
    settings = loop.controller
    rows = on_row_clock(record)
    signals = read_signals(rows, settings.error_deadband if settings else 0.0)
    refusal = refusals.dead_or_copied(signals)
    if refusal is not None:
        return _refused(record, settings, refusal)
    match = best_match(signals, saturates=saturates(rows), quantum=rows.u_quantum or 0.0)
    if settings is not None:
        found = _from_file(rows, signals, settings, match)
    elif match is not None:
        found = _from_log(rows, signals, match, coarse=rows is not record)
    else:
        return _refused(record, settings, refusals.too_few_rows(record))
    feedforward = _feedforward_words(match, loop)
    return _on_loop_clock(replace(found, reasons=(*found.reasons, *feedforward)), record, settings)


def _on_loop_clock(found: Recovery, record: Record, settings: ControllerSettings | None) -> Recovery:
    """Count the skew in the loop's samples, and find the anti-windup, which needs all of them."""
    apart = rows_apart(record)
    table = tuple((lag * apart, left) for lag, left in found.lag_table)
    found = replace(found, skew_samples=found.skew_samples * apart, lag_table=table)
    if found.usable and (settings is None or settings.anti_windup is None):
        found = replace(found, controller=anti_windup_of(shift_actuator(record, found.skew_samples), found.controller))
    if apart == 1:
        return found
    words = f"the log has a row every {duration(record.log_step)}: what is found in it is approximate"
    return replace(found, reasons=(*found.reasons, words))


def _feedforward_words(match: Match | None, loop: Loop) -> tuple[str, ...]:
    if match is None or match.terms.feedforward == 0:
        return ()
    gains = match.fit.coefficients[-match.terms.feedforward :]
    names = [signal.column or "disturbance" for signal in loop.signals.disturbances]
    names += ["disturbance"] * (len(gains) - len(names))
    listed = ", ".join(f"{name} × {number(float(gain))}" for name, gain in zip(names, gains, strict=False))
    return (f"a feedforward from declared disturbances acts beside the controller ({listed})",)


def _refused(record: Record, settings: ControllerSettings | None, refusal: Problem) -> Recovery:
    nothing = Pid(gain=0.0, low=record.low, high=record.high, max_rate=record.max_rate)
    return Recovery(
        controller=nothing if settings is None else stated_controller(settings, record),
        source="log" if settings is None else "file",
        skew_samples=0,
        relative_residual=math.inf,
        lag_table=(),
        reasons=(refusal.what,),
        usable=False,
        refusal=refusal,
    )


def _from_log(record: Record, signals: Signals, match: Match, *, coarse: bool) -> Recovery:
    controller, by_roundness = roundest(match, record, coarse=coarse)
    refusal = refusals.after_fitting(record, signals, match)
    own_law = _static_either_way(signals, match)
    reasons = [_how_found(match, record), *_skew_words(match.lag)]
    if by_roundness:
        reasons.append(
            f"the log cannot tell the integral forms apart; '{controller.integral}' is the one with round settings"
        )
    if own_law:
        reasons.append(refusals.OWN_LAW_WORDS)
    if refusal is not None:
        reasons.append(refusal.what)
    return Recovery(
        controller=controller,
        source="log",
        skew_samples=match.lag,
        relative_residual=match.fit.relative,
        lag_table=match.table,
        reasons=tuple(reasons),
        usable=refusal is None,
        refusal=refusal,
        own_law=own_law,
        bias=_bias(record, controller, match.lag),
    )


def _static_either_way(signals: Signals, match: Match) -> bool:
    """Tell whether nothing but one static relation between actuator and measurement was found.

    White noise on it may be the sensor's own: then the measurement follows the actuator, and the "controller" is the
    plant's inverse. Rare large moves of the actuator off the relation are another matter: they show which is which.
    """
    if match.terms.kind != "P" or match.terms.feedforward > 0 or setpoint_moves(signals):
        return False
    size = np.abs(match.fit.residual)
    moved = float(np.median(size)) < thresholds.HEAVY_TAIL * float(np.sqrt(np.mean(size**2)))
    return match.fit.relative < (thresholds.OWN_LAW if moved else thresholds.EITHER_WAY)


def _from_file(record: Record, signals: Signals, settings: ControllerSettings, match: Match | None) -> Recovery:
    stated = stated_controller(settings, record)
    tried = _every_lag_and_form(record, _without_feedforward(signals, match), settings, match)
    lag, form = _first_clearly_best(tried)
    reasons: list[str] = []
    if match is not None and _log_says_otherwise(tried[lag, form], match):
        reasons.append(_disagreement(record, match))
        lag = match.lag
        form = _first_clearly_best({key: left for key, left in tried.items() if key[0] == lag})[1]
    chosen, left = replace(stated, integral=form), tried[lag, form]
    reasons = [f"the controller is the loop file's; {_left_words(left)}", *_skew_words(lag), *reasons]
    static = math.isinf(chosen.integral_time) and chosen.derivative_time == 0
    static = static and (match is None or match.terms.feedforward == 0)
    own_law = static and not setpoint_moves(signals) and left < thresholds.OWN_LAW
    return Recovery(
        controller=chosen,
        source="file",
        skew_samples=lag,
        relative_residual=left,
        lag_table=tuple(sorted((at, other) for (at, f), other in tried.items() if f == form)),
        reasons=(*reasons, refusals.OWN_LAW_WORDS) if own_law else tuple(reasons),
        own_law=own_law,
        bias=_bias(record, chosen, lag),
    )


def _every_lag_and_form(
    record: Record, signals: Signals, settings: ControllerSettings, match: Match | None
) -> dict[tuple[int, str], float]:
    """Relative residual of the file's gains at every lag in every integral form the file leaves open."""
    stated = stated_controller(settings, record)
    forms = (settings.integral,) if settings.integral else ("backward", *(f for f in INTEGRALS if f != "backward"))
    levels = match.levels if match is not None else record.u_quantum is not None
    robust = match.fit.robust if match is not None else saturates(record)

    def left(lag: int, form: str) -> float:
        controller = replace(stated, integral=form)
        design = lay_out(signals, lag, terms_of(controller, record.period), levels=levels)
        coefficients = coefficients_of(controller, record.period)
        residual = residual_of(design, coefficients, np.ones(len(design.target)))
        return measured(design, coefficients, residual, robust).relative if len(residual) else math.inf

    return {(lag, form): left(lag, form) for lag in LAGS for form in forms}


def _without_feedforward(signals: Signals, match: Match | None) -> Signals:
    """Take away what declared disturbances do, so that the file's gains are compared with the controller's part."""
    if match is None or match.terms.feedforward == 0:
        return signals
    part = match.fit.coefficients[-match.terms.feedforward :] @ signals.w
    return replace(signals, u=signals.u - np.roll(part, match.lag))


def _first_clearly_best(left: dict[tuple[int, str], float]) -> tuple[int, str]:
    """Return the first key whose residual no later one betters clearly; keys come nearest lag and usual form first."""
    best = next(iter(left))
    for key in left:
        # Two exact fits differ by rounding only.
        if max(left[key], _ROUNDING) < thresholds.LAG_BETTER * max(left[best], _ROUNDING):
            best = key
    return best


def _log_says_otherwise(stated: float, match: Match) -> bool:
    """True when the log's own gains explain clearly more than the file's."""
    return stated > thresholds.EXACT and match.fit.relative < thresholds.CAUSE_HALVES * stated


def _disagreement(record: Record, match: Match) -> str:
    own = controller_of(match, record, "backward")
    time = "none" if math.isinf(own.integral_time) else duration(own.integral_time)
    return (
        f"the log does not agree with the file's gains: it shows gain {number(own.gain, 4)}, integral time {time} "
        f"(backward form); {_left_words(match.fit.relative)}"
    )


def _how_found(match: Match, record: Record) -> str:
    """Say by which regression the controller was found."""
    kind, side = match.terms.kind, "levels" if match.levels else "differences"
    norm = "least absolute residuals" if match.fit.robust else "least squares"
    rounding = f" (rounded to {number(record.u_quantum)})" if match.levels and record.u_quantum else ""
    return f"{kind} controller found in the log from {side}{rounding} by {norm}; {_left_words(match.fit.relative)}"


def _left_words(relative: float) -> str:
    if relative < thresholds.EXACT:
        return "it explains the actuator exactly"
    return f"it leaves {100 * relative:.2g} % of the actuator's movement"


def _skew_words(lag: int) -> list[str]:
    return [skew_words(lag)] if lag != 0 else []


def _bias(record: Record, controller: Pid, lag: int) -> float | None:
    """Median of u − K e, for a controller without integral action."""
    if math.isfinite(controller.integral_time) or controller.gain == 0.0:
        return None
    shifted = shift_actuator(record, lag)
    inside = shifted.in_span & shifted.valid
    e = record.e + (controller.setpoint_weight - 1.0) * record.r
    return float(np.median((shifted.u - controller.gain * e)[inside])) if inside.any() else None
