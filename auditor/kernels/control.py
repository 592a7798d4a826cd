"""The control law with uneven execution times, over lanes (method, equations 3.1–3.4).

K, h, Ti, Td, Tf as in the method; I, D, e, v are per lane. Choices shared by all lanes are integers in `form`.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.kernels import rows as R
from auditor.kernels.jit import compiled


@compiled
def settings_of(pid: FloatArray) -> Any:
    """The settings as a tuple: values that stay in registers, where an array would be read again for every lane."""
    return (
        pid[0], pid[1], pid[2], pid[3], pid[4], pid[5], pid[6], pid[7], pid[8], pid[9], pid[10], pid[11], pid[12],
    )  # fmt: skip


@compiled
def choices_of(form: IntArray) -> Any:
    """The choices as a tuple, for the same reason."""
    return (form[0], form[1], form[2], form[3], form[4], form[5], form[6], form[7])


@compiled
def deadbanded(e: float, width: float) -> float:
    """Error as the controller sees it: zero up to `width`."""
    return 0.0 if abs(e) <= width else e


@compiled
def clip(x: float, low: float, high: float) -> float:
    """`x` held inside low…high."""
    return high if x > high else (low if x < low else x)


@compiled
def begin(control: FloatArray, now: FloatArray, u0: float, pid: Any, form: Any) -> None:
    """Start a span from the record: I = u0 − K e0, D = 0, the actuator where it was."""
    for lane in range(now.shape[1]):
        e = deadbanded(now[R.ERROR, lane], pid[R.DEADBAND])
        r = now[R.SETPOINT, lane]
        control[R.INTEGRAL, lane] = u0 - pid[R.GAIN] * (e + pid[R.WEIGHT] * r)
        control[R.DERIVATIVE, lane] = 0.0
        control[R.ERROR_THEN, lane] = e
        control[R.SLOPE_THEN, lane] = e if form[R.RATE_ON_ERROR] == 1 else -now[R.MEASUREMENT, lane]
        control[R.RECEIVED, lane] = now[R.MEASUREMENT, lane]
        control[R.COMMAND, lane] = clip(u0, pid[R.LOW], pid[R.HIGH])
        control[R.WOULD, lane] = control[R.COMMAND, lane]
        control[R.POSITION, lane] = u0
        control[R.SETPOINT_THEN, lane] = r
        control[R.DEVIATION, lane] = 0.0
        control[R.HELD, lane] = control[R.COMMAND, lane] - pid[R.GAIN] * pid[R.WEIGHT] * r


@compiled
def bridged(I: float, e: float, then: float, held: float, m: float, pid: Any, form: Any, alpha: float) -> float:
    """I after a silence of m samples (3.1)."""
    b = then if form[R.INTEGRATE] == R.FORWARD else e
    b = 0.5 * (then + e) if form[R.INTEGRATE] == R.TRAPEZOID else b
    c = e if form[R.BRIDGE] == R.BRIDGE_CURRENT else then
    summed = I + pid[R.INTEGRAL_STEP] * ((m - 1.0) * c + b)
    return I + alpha * (held - I) if form[R.BRIDGE] == R.BRIDGE_SATURATING else summed


@compiled
def unwound(I: float, before: float, v: float, rho: float, command: float, m: float, pid: Any, form: Any) -> float:
    """I after anti-windup; a controller without integral action keeps its bias."""
    share = 1.0 if pid[R.TRACKING] == 0.0 else min(1.0, m * pid[R.PERIOD] / pid[R.TRACKING])
    drained = I + (command - v - rho) * share
    grows = (v + rho > pid[R.HIGH] and before < I) or (v + rho < pid[R.LOW] and before > I)
    frozen = before if grows else I
    result = drained if form[R.WINDUP] == R.WINDUP_BACK else I
    result = frozen if form[R.WINDUP] == R.WINDUP_FREEZE else result
    return I if pid[R.INTEGRAL_STEP] == 0.0 else result


@compiled
def run_lane(
    lane: int,
    y: float,
    r: float,
    rho: float,
    m: float,
    alpha: float,
    control: FloatArray,
    pid: Any,
    form: Any,
) -> None:
    """Run the controller of one lane on measurement y, m samples after it ran last; leaves the command in WOULD."""
    e = deadbanded(r - y, pid[R.DEADBAND])
    before = control[R.INTEGRAL, lane]
    s = e if form[R.RATE_ON_ERROR] == 1 else -y
    D = 0.0
    if pid[R.RATE_GAIN] != 0.0:
        lag = pid[R.FILTER] + m * pid[R.PERIOD]
        D = (pid[R.FILTER] * control[R.DERIVATIVE, lane] + pid[R.RATE_GAIN] * (s - control[R.SLOPE_THEN, lane])) / lag
    I = bridged(before, e, control[R.ERROR_THEN, lane], control[R.HELD, lane], m, pid, form, alpha)
    fixed = pid[R.GAIN] * (e + pid[R.WEIGHT] * r) + D
    v = fixed + I
    if form[R.WINDUP] == R.WINDUP_FREEZE:
        # Freezing decides on the command it would have given, then gives the command without that step.
        I = unwound(I, before, v, rho, 0.0, m, pid, form)
        v = fixed + I
    command = clip(v + rho, pid[R.LOW], pid[R.HIGH])
    if form[R.WINDUP] == R.WINDUP_BACK:
        I = unwound(I, before, v, rho, command, m, pid, form)
    control[R.INTEGRAL, lane] = I
    control[R.DERIVATIVE, lane] = D
    control[R.ERROR_THEN, lane] = e
    control[R.SLOPE_THEN, lane] = s
    control[R.SETPOINT_THEN, lane] = r
    control[R.WOULD, lane] = command
    control[R.HELD, lane] = command - rho - D - pid[R.GAIN] * pid[R.WEIGHT] * r


@compiled
def move(control: FloatArray, u: float, pid: Any) -> None:
    """Move the actuators towards their commands, at most one step each (3.4); keep the deviation from the record.

    An actuator with a visible resolution q deviates by whole q, so that the recorded position comes back exactly.
    """
    step = pid[R.STEP]
    q = pid[R.RESOLUTION]
    if math.isinf(step):
        for lane in range(control.shape[1]):
            control[R.POSITION, lane] = control[R.COMMAND, lane]
    else:
        for lane in range(control.shape[1]):
            position = control[R.POSITION, lane]
            control[R.POSITION, lane] = position + clip(control[R.COMMAND, lane] - position, -step, step)
    for lane in range(control.shape[1]):
        control[R.DEVIATION, lane] = control[R.POSITION, lane] - u
    if q > 0.0:
        for lane in range(control.shape[1]):
            control[R.DEVIATION, lane] = q * np.rint(control[R.DEVIATION, lane] / q)
