"""From the coefficients of the controller's equation to a `Pid` and back.

Letters as in `regression`: K of the backward form, Ki = K h / Ti, g = K Td / (Tf + h), w = K (β − 1), and the
derivative's pole a = Tf / (Tf + h).

At one sample per update the three integral forms are one and the same law with K, K + Ki or K + Ki / 2 in front
(they differ again only with a setpoint weight, and then only in what that weight is called), and the same holds after
a silence bridged with the held or the current error. A log alone therefore cannot tell them apart. The form in which
the settings are round numbers is taken, because people enter round numbers; the backward form when none is.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from auditor.arrays import FloatArray
from auditor.controllers.pid import INTEGRALS, Pid
from auditor.identify.alignment import Match
from auditor.identify.regression import Terms
from auditor.logs.record import Record
from auditor.loop import ControllerSettings

_SHARE = {"forward": 1.0, "backward": 0.0, "trapezoid": 0.5}
"""Share of Ki that the form's gain has more than the backward form's."""

_NO_GAIN = 1e-6
"""Gain, as a share of K h / Ti, that is none."""

_DIGITS = 8
"""Digits after which a setting is no round number."""


def terms_of(controller: Pid, period: float) -> Terms:
    """Return the terms a given controller's equation has."""
    derivative = controller.derivative_on if controller.derivative_time > 0 else None
    return Terms(
        integral=math.isfinite(controller.integral_time),
        derivative=derivative,
        weight=controller.setpoint_weight != 1.0,
        pole=controller.filter_time / (controller.filter_time + period) if derivative else 0.0,
    )


def coefficients_of(controller: Pid, period: float) -> FloatArray:
    """Return K, Ki, g, w of a given controller, those it has."""
    terms = terms_of(controller, period)
    step = controller.integral_gain * period
    values = [controller.gain - _SHARE[controller.integral] * step]
    if terms.integral:
        values.append(step)
    if terms.derivative:
        values.append(controller.gain * controller.derivative_time / (controller.filter_time + period))
    if terms.weight:
        values.append(controller.gain * (controller.setpoint_weight - 1.0))
    return np.array(values)


def stated_controller(settings: ControllerSettings, record: Record) -> Pid:
    """Return the controller of a loop file with the record's limits; what the file leaves open gets its default."""
    return Pid(
        gain=settings.gain,
        integral_time=math.inf if settings.integral_time is None else settings.integral_time,
        derivative_time=settings.derivative_time,
        derivative_filter=settings.derivative_filter,
        derivative_on=settings.derivative_on,
        setpoint_weight=settings.setpoint_weight,
        error_deadband=settings.error_deadband,
        integral=settings.integral or "backward",
        gap_integral=settings.gap_integral,
        anti_windup=settings.anti_windup or "back-calculation",
        tracking_time=settings.tracking_time,
        low=record.low,
        high=record.high,
        max_rate=record.max_rate,
    )


def controller_of(match: Match, record: Record, form: str) -> Pid:
    """Write a fit as the controller of one integral form."""
    terms, period = match.terms, record.period
    values = [float(value) for value in match.fit.coefficients]
    gain = values.pop(0)
    step = values.pop(0) if terms.integral else 0.0
    gain += _SHARE[form] * step
    plain = Pid(
        gain=gain,
        integral_time=gain * period / step if step != 0 else math.inf,
        integral=form,
        low=record.low,
        high=record.high,
        max_rate=record.max_rate,
    )
    if terms.derivative:
        time = values.pop(0) * period / (1.0 - terms.pole) / gain
        lag = terms.pole * period / (1.0 - terms.pole)
        plain = replace(
            plain,
            derivative_time=time,
            derivative_filter=time / lag if lag > 0 else math.inf,
            derivative_on=terms.derivative,
        )
    return replace(plain, setpoint_weight=1.0 + values.pop(0) / gain) if terms.weight else plain


def roundest(match: Match, record: Record, *, coarse: bool = False) -> tuple[Pid, bool]:
    """Return the controller in the integral form with the roundest settings, and whether roundness decided."""
    if coarse:
        return controller_of(match, record, "trapezoid"), False
    if not match.terms.integral:
        return controller_of(match, record, "backward"), False
    every = [controller_of(match, record, form) for form in ("backward", *(f for f in INTEGRALS if f != "backward"))]
    # A pure integral controller has a gain in the forward form only.
    step = abs(every[0].integral_gain) * record.period
    sound = [c for c in every if c.integral_time > 0 and abs(c.gain) > _NO_GAIN * step] or every
    digits = [_digits(controller) for controller in sound]
    fewest = int(np.argmin(digits))
    others = [d for i, d in enumerate(digits) if i != fewest]
    decided = bool(others) and digits[fewest] + 2 <= min(others)
    return sound[fewest if decided else 0], decided


def _digits(controller: Pid) -> int:
    """Significant digits of all settings a person may have entered."""
    settings = [controller.gain, controller.integral_time, controller.setpoint_weight]
    if controller.derivative_time > 0:
        settings += [controller.derivative_time]
    return sum(_significant(value) for value in settings)


def _significant(value: float) -> int:
    for digits in range(1, _DIGITS):
        if math.isclose(value, float(f"{value:.{digits - 1}e}"), rel_tol=1e-7):
            return digits
    return _DIGITS
