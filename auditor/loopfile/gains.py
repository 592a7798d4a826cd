"""Controller settings in the ideal form, u = K (e + ∫e/Ti + Td de/dt), from the forms a controller may state them in.

ideal
    K, Ti, Td as they are.
series
    u = K (1 + 1/(Ti s)) (1 + Td s) e, the interacting form:
    K' = K (1 + Td/Ti), Ti' = Ti + Td, Td' = Ti Td / (Ti + Td). The derivative filter keeps its time: N' = N Td'/Td.
    A setpoint that does not pass the derivative (``derivative_on = "measurement"``) does not pass the factor
    (1 + Td/Ti) of the proportional part either: β' = β / (1 + Td/Ti).
    With ``derivative_on = "error"`` it is β' = (β + Td/Ti) / (1 + Td/Ti).
parallel
    u = K e + (1/Ti) ∫e + Td de/dt: `gain`, 1/`integral_time` and `derivative_time` are three gains that do not act on
    each other, and the sign of `gain` holds for all three: Ti' = abs(K) Ti, Td' = Td / abs(K).

A proportional band PB [%] over a measurement range is K = (100 / PB) (actuator span / measurement range); the span is
100 for an actuator in %, else high − low. Reverse action (u rises when the measurement falls) is a positive gain.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from auditor.loop import ControllerSettings
from auditor.loopfile.schema import ActuatorTable, ControllerTable
from auditor.text import duration, number


@dataclass(frozen=True, slots=True)
class Terms:
    """Gain [actuator unit / measurement unit], integral time (infinite: none) and derivative time [s], β and N."""

    gain: float
    integral_time: float
    derivative_time: float
    setpoint_weight: float
    derivative_filter: float


def actuator_span(actuator: ActuatorTable) -> float | None:
    """Return the full span a proportional band refers to [actuator unit], None when it is not known."""
    if actuator.unit.strip() == "%":
        return 100.0
    low, high = (actuator.low, actuator.high) if actuator.range is None else actuator.range
    return None if low is None or high is None else high - low


def stated(table: ControllerTable, actuator: ActuatorTable) -> Terms:
    """Return the terms in the form the loop file states, with the gain's sign; the table must be free of faults."""
    ti = table.integral_time
    if table.repeats_per_minute is not None:
        ti = 60.0 / table.repeats_per_minute
    return Terms(
        gain=_gain(table, actuator),
        integral_time=ti if isinstance(ti, float) else math.inf,
        derivative_time=table.derivative_time,
        setpoint_weight=table.setpoint_weight,
        derivative_filter=table.derivative_filter,
    )


def _gain(table: ControllerTable, actuator: ActuatorTable) -> float:
    gain = table.gain
    if table.proportional_band is not None and table.range is not None:
        span = actuator_span(actuator)
        gain = 100.0 / table.proportional_band * (span or math.nan) / (table.range[1] - table.range[0])
    if gain is None:
        raise ValueError("a controller table without a gain reached the conversion")
    return -gain if table.action == "direct" else gain


def to_ideal(form: str, terms: Terms, derivative_on: str = "measurement") -> Terms:
    """Convert `terms` from `form` to the ideal form (formulas in the module's text)."""
    if form == "parallel":
        size = abs(terms.gain)
        return replace(terms, integral_time=terms.integral_time * size, derivative_time=terms.derivative_time / size)
    return _from_series(terms, derivative_on) if form == "series" else terms


def _from_series(terms: Terms, derivative_on: str) -> Terms:
    share = terms.derivative_time / terms.integral_time
    factor = 1.0 + share
    on_setpoint = terms.setpoint_weight + (share if derivative_on == "error" else 0.0)
    return Terms(
        gain=terms.gain * factor,
        integral_time=terms.integral_time + terms.derivative_time,
        derivative_time=terms.derivative_time / factor,
        setpoint_weight=on_setpoint / factor,
        derivative_filter=terms.derivative_filter / factor,
    )


def ideal_terms(table: ControllerTable, actuator: ActuatorTable) -> Terms:
    """Return the terms in the ideal form; the table must be free of faults."""
    return to_ideal(table.form, stated(table, actuator), table.derivative_on)


def ideal_settings(table: ControllerTable, actuator: ActuatorTable) -> ControllerSettings:
    """Return the controller in the ideal form; the table must be free of faults."""
    terms = ideal_terms(table, actuator)
    return ControllerSettings(
        kind=table.kind,
        gain=terms.gain,
        integral_time=None if math.isinf(terms.integral_time) else terms.integral_time,
        derivative_time=terms.derivative_time,
        integral=table.integral,
        gap_integral=table.gap_integral,
        anti_windup=table.anti_windup,
        tracking_time=table.tracking_time,
        derivative_on=table.derivative_on,
        derivative_filter=terms.derivative_filter,
        setpoint_weight=terms.setpoint_weight,
        error_deadband=table.error_deadband,
        bias=table.bias,
    )


def gains_in_words(table: ControllerTable, actuator: ActuatorTable, unit: str) -> str:
    """Tell the controller's gains as stated and, where the form is not ideal, as converted.

    Parameters
    ----------
    table, actuator : ControllerTable, ActuatorTable
        Free of faults.
    unit : str
        Unit of the measurement.
    """
    per = f" {actuator.unit or '1'}/{unit or '1'}" if actuator.unit or unit else ""
    ideal = ideal_terms(table, actuator)
    words = f"gain {number(ideal.gain, 4)}{per}, {_times(ideal)}"
    if table.form == "ideal":
        return f"Ideal form: {words}."
    first = stated(table, actuator)
    times = _parallel_gains(first) if table.form == "parallel" else _times(first)
    return (
        f"Stated in the {table.form} form: gain {number(first.gain, 4)}{per}, {times}. "
        f"Converted to the ideal form: {words}, setpoint weight {number(ideal.setpoint_weight)}, "
        f"derivative filter {number(ideal.derivative_filter)}."
    )


def _times(terms: Terms) -> str:
    if math.isinf(terms.integral_time):
        integral = "no integral action"
    else:
        integral = f"integral time {duration(terms.integral_time)}"
    return f"{integral}, derivative time {duration(terms.derivative_time)}"


def _parallel_gains(terms: Terms) -> str:
    integral = number(1.0 / terms.integral_time, 4)
    return f"integral gain {integral} (unit of the gain per s), derivative gain {number(terms.derivative_time, 4)} s"
