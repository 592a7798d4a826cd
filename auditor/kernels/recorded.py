"""The recorded controller along its own record, and the replay that updates at every sample (method, §2).

Letters as in `control`: I, D, e, v; rho is what the controller does not explain of the actuator u.
"""

from __future__ import annotations

import math

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.kernels import rows
from auditor.kernels.control import begin, clip, move, run_lane
from auditor.kernels.jit import compiled


@compiled
def see(y: float, r: float, now: FloatArray) -> None:
    """Put one sample where `begin` looks for it."""
    now[rows.MEASUREMENT, 0] = y
    now[rows.SETPOINT, 0] = r
    now[rows.ERROR, 0] = r - y


@compiled
def explain_span(
    y: FloatArray, r: FloatArray, u: FloatArray, start: int, stop: int,
    pid: FloatArray, form: IntArray, resolution: float, rho: FloatArray, v: FloatArray,
) -> None:  # fmt: skip
    """Fill rho and v of samples start…stop−1.

    rho stays while the limited command lies within `resolution` of u, else it is u − v. Then I follows the recorded
    actuator: I ← I + u − v − rho with back-calculation at once; other schemes, and an actuator limited in its rate,
    keep their own anti-windup, so that injecting rho returns the record with every scheme.
    """
    now = np.zeros((rows.SIGNALS, 1))
    control = np.zeros((rows.CONTROL_ROWS, 1))
    free = np.zeros((rows.CONTROL_ROWS, 1))
    unlimited = pid.copy()
    unlimited[rows.LOW], unlimited[rows.HIGH] = -np.inf, np.inf
    see(y[start], r[start], now)
    begin(control, now, u[start], pid, form)
    rho[start], v[start] = 0.0, u[start]
    for k in range(start + 1, stop):
        free[:, :] = control
        run_lane(0, y[k], r[k], 0.0, 1.0, 0.0, free, unlimited, form)
        run_lane(0, y[k], r[k], rho[k - 1], 1.0, 0.0, control, pid, form)
        v[k] = free[rows.WOULD, 0]
        position = control[rows.WOULD, 0]
        if not math.isinf(pid[rows.STEP]):
            position = u[k - 1] + clip(position - u[k - 1], -pid[rows.STEP], pid[rows.STEP])
        if abs(position - u[k]) <= resolution:
            rho[k] = rho[k - 1]
            if pid[rows.INTEGRAL_STEP] != 0.0:
                control[rows.INTEGRAL, 0] += u[k] - position
        else:
            rho[k] = u[k] - v[k]
            control[:, :] = free


@compiled
def replay_every_sample(
    y: FloatArray, r: FloatArray, u: FloatArray, rho: FloatArray, start: int, stop: int,
    A: FloatArray, B0: FloatArray, B1: FloatArray, C: FloatArray, delay: int, quantum: float,
    pid: FloatArray, form: IntArray, replayed: FloatArray,
) -> None:  # fmt: skip
    """Replay samples start…stop−1 with an update at each (2.1, 3.1–3.4); fill the replayed measurement."""
    now = np.zeros((rows.SIGNALS, 1))
    control = np.zeros((rows.CONTROL_ROWS, 1))
    ring = delay + 2
    past = np.zeros(ring)
    dx = np.zeros(len(C))
    following = np.zeros(len(C))
    for k in range(start, stop):
        t = k - start
        away = 0.0
        for i in range(len(C)):
            away += C[i] * dx[i]
        away = quantum * np.rint(away / quantum) if quantum > 0.0 else away
        replayed[k] = y[k] + away
        if t == 0:
            see(y[k], r[k], now)
            begin(control, now, u[k], pid, form)
        else:
            run_lane(0, replayed[k], r[k], rho[k], 1.0, 0.0, control, pid, form)
            control[rows.COMMAND, 0] = control[rows.WOULD, 0]
            move(control, u[k], pid)
        past[t % ring] = control[rows.DEVIATION, 0]
        for i in range(len(C)):
            following[i] = B0[i] * past[(t - delay) % ring] + B1[i] * past[(t - delay - 1) % ring]
            for j in range(len(C)):
                following[i] += A[i, j] * dx[j]
        dx[:] = following
