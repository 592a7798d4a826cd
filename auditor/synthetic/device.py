"""The controller of a simulated loop, written from the method (§3, equations 3.1–3.4).

Textbook letters: K gain, I integral part, D derivative part, e error, m samples since the last update, h base period.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from auditor.controllers.pid import Pid


class Memory(NamedTuple):
    """What the controller carries between updates.

    Its integral and derivative parts, the error and the derivative's signal it last received, its command, and the
    samples since.
    """

    integral: float
    derivative: float
    error: float
    slope_of: float
    command: float
    since: int


def begin(pid: Pid, position: float, r: float, y: float) -> Memory:
    """First update of a span: m = 0, D = 0 and I such that the actuator stays where it is."""
    return Memory(position - _proportional(pid, r, y), 0.0, r - y, _slope_of(pid, r, y), position, 0)


def execute(pid: Pid, memory: Memory, r: float, y: float, m: int, h: float) -> Memory:
    """An update m samples after the last one: equations (3.1)–(3.3), then anti-windup."""
    integral = memory.integral + _integral_step(pid, memory, r - y, m, h)
    derivative = _derivative(pid, memory, _slope_of(pid, r, y), m, h)
    free = _proportional(pid, r, y) + derivative
    if pid.anti_windup == "freeze" and _outward(pid, free + integral, integral - memory.integral):
        integral = memory.integral
    v = free + integral
    command = min(max(v, pid.low), pid.high)
    # Without integral action I is a constant bias.
    if pid.anti_windup == "back-calculation" and not math.isinf(pid.integral_time):
        integral += (command - v) * (1.0 if pid.tracking_time == 0 else min(1.0, m * h / pid.tracking_time))
    return Memory(integral, derivative, r - y, _slope_of(pid, r, y), command, 0)


def moved(position: float, wanted: float, most: float) -> float:
    """Position after one period of movement by at most `most` towards `wanted` (3.4)."""
    return wanted if abs(wanted - position) <= most else position + math.copysign(most, wanted - position)


def _integral_step(pid: Pid, memory: Memory, e: float, m: int, h: float) -> float:
    """Change of I over m samples (3.1)."""
    if math.isinf(pid.integral_time):
        return 0.0
    if pid.gap_integral == "saturating":
        return (1.0 - math.exp(-m * h / pid.integral_time)) * (memory.command - memory.integral)
    now, before = _felt(pid, e), _felt(pid, memory.error)
    last = {"forward": before, "backward": now, "trapezoid": 0.5 * (before + now)}[pid.integral]
    silence = {"held": before, "current": now}[pid.gap_integral]
    return pid.integral_gain * h * ((m - 1) * silence + last)


def _derivative(pid: Pid, memory: Memory, slope_of: float, m: int, h: float) -> float:
    """Derivative part after m samples (3.2)."""
    if pid.derivative_time == 0:
        return 0.0
    change = pid.gain * pid.derivative_time * (slope_of - memory.slope_of)
    return (pid.filter_time * memory.derivative + change) / (pid.filter_time + m * h)


def _felt(pid: Pid, e: float) -> float:
    """The error as the controller takes it, zero inside its dead-band."""
    return e if abs(e) > pid.error_deadband else 0.0


def _proportional(pid: Pid, r: float, y: float) -> float:
    """K (β r − y), the error's dead-band included."""
    return pid.gain * (_felt(pid, r - y) - (1.0 - pid.setpoint_weight) * r)


def _slope_of(pid: Pid, r: float, y: float) -> float:
    """The signal the derivative is taken of."""
    return _felt(pid, r - y) if pid.derivative_on == "error" else -y


def _outward(pid: Pid, v: float, step: float) -> bool:
    """True when `v` is beyond a limit and the integral's step pushes further out."""
    return (v > pid.high and step > 0) or (v < pid.low and step < 0)
