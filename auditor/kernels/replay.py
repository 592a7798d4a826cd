"""One closed-loop step over all lanes, and the loop over a span (method, §2–4).

Lanes are settings × likely plants. Letters: A, B0, B1, C of the sampled plant with d whole samples of delay,
dx its deviation state, δ the deviation of the actuator; y, r, u the record.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numba import types

from auditor.arrays import FloatArray, IntArray
from auditor.kernels import rows as R
from auditor.kernels.control import begin, choices_of, move, run_lane, settings_of
from auditor.kernels.jit import RULE_TYPE, compiled, compiled_as


@compiled
def leading_zeros(column: IntArray) -> int:
    """Number of lanes before the first that is perturbed."""
    for lane in range(len(column)):
        if column[lane] != 0:
            return lane
    return len(column)


@compiled
def observe(
    y: float,
    r: float,
    noise: FloatArray,
    column: IntArray,
    quiet: int,
    quantum: float,
    C: FloatArray,
    dx: FloatArray,
    now: FloatArray,
) -> None:
    """Measurement of every lane: the record plus the plant's deviation (2.1), with the record's own resolution."""
    for lane in range(dx.shape[1]):
        now[R.MEASUREMENT, lane] = C[0, lane] * dx[0, lane]
    for i in range(1, dx.shape[0]):
        for lane in range(dx.shape[1]):
            now[R.MEASUREMENT, lane] += C[i, lane] * dx[i, lane]
    if quantum > 0.0:
        # Whole steps away from the record: the same as rounding y + C dx, on whatever lattice y was stored.
        for lane in range(dx.shape[1]):
            now[R.MEASUREMENT, lane] = quantum * np.rint(now[R.MEASUREMENT, lane] / quantum)
    for lane in range(quiet):
        now[R.MEASUREMENT, lane] = y + now[R.MEASUREMENT, lane]
    for lane in range(quiet, dx.shape[1]):
        now[R.MEASUREMENT, lane] = y + noise[column[lane]] + now[R.MEASUREMENT, lane]
    for lane in range(dx.shape[1]):
        now[R.SETPOINT, lane] = r
        now[R.ERROR, lane] = r - now[R.MEASUREMENT, lane]


@compiled
def predict(now: FloatArray, device: FloatArray, offset: FloatArray, C: FloatArray) -> None:
    """ŷ of the device's model: its state (rows 0…n−1 of `device`) seen through C, plus the offset set at updates."""
    n = len(C)
    for lane in range(now.shape[1]):
        value = offset[0, lane]
        for i in range(n):
            value += C[i] * device[i, lane]
        now[R.PREDICTED, lane] = value


@compiled
def correct(
    now: FloatArray, updated: IntArray, device: FloatArray, offset: FloatArray, C: FloatArray, floor: float
) -> None:
    """At an update both ends learn y: set the offset, and blame a constant load for what the model missed.

    The missed part divided by the plant's response to a unit load since the last update is the load's step
    (Lunze & Lehmann 2010, disturbance estimator); the response is floored so that noise is not amplified.
    """
    n = len(C)
    for lane in range(now.shape[1]):
        missed = now[R.MEASUREMENT, lane] - now[R.PREDICTED, lane]
        response = 0.0
        for i in range(n):
            response += C[i] * device[n + i, lane]
        response = response if abs(response) > abs(floor) else floor
        sent = updated[lane] == 1
        offset[0, lane] = offset[0, lane] + missed if sent else offset[0, lane]
        offset[1, lane] = offset[1, lane] + missed / response if sent else offset[1, lane]
        for i in range(n):
            device[n + i, lane] = 0.0 if sent else device[n + i, lane]


@compiled
def advance_device(
    device: FloatArray,
    following: FloatArray,
    offset: FloatArray,
    inputs: FloatArray,
    k: int,
    u0: float,
    A: FloatArray,
    B0: FloatArray,
    B1: FloatArray,
    delay: int,
) -> None:
    """One period of the device's model, driven by the positions since the span began and by its load estimate."""
    n = len(B0)
    ring = inputs.shape[0]
    late = k - delay
    later = late - 1
    for lane in range(device.shape[1]):
        new = inputs[late % ring, lane] - u0 if late >= 0 else 0.0
        old = inputs[later % ring, lane] - u0 if later >= 0 else 0.0
        for i in range(n):
            value = B0[i] * (new + offset[1, lane]) + B1[i] * (old + offset[1, lane])
            unit = B0[i] + B1[i]
            for j in range(n):
                value += A[i, j] * device[j, lane]
                unit += A[i, j] * device[n + j, lane]
            following[i, lane] = value
            following[n + i, lane] = unit
    device[:, :] = following


@compiled
def watch(now: FloatArray, control: FloatArray, form: Any) -> None:
    """Fill the row a rule watches."""
    for lane in range(now.shape[1]):
        value = now[R.ERROR, lane]
        value = now[R.MEASUREMENT, lane] if form[R.WATCH] == R.WATCH_MEASUREMENT else value
        value = control[R.WOULD, lane] if form[R.WATCH] == R.WATCH_COMMAND else value
        now[R.WATCHED, lane] = value


@compiled
def decide(
    first: bool, since: IntArray, fired: Any, gap: IntArray, silence: IntArray, count: IntArray, updated: IntArray
) -> None:
    """Guards around the rule: first sample, min_gap (the request stays latched), max_silence, then the rule."""
    for lane in range(len(since)):
        asked = 1 if (fired[lane] != 0 or count[R.LATCHED, lane] == 1) else 0
        due = 1 if (asked == 1 or since[lane] >= silence[lane]) else 0
        due = 0 if since[lane] < gap[lane] else due
        due = 1 if first else due
        updated[lane] = due
        count[R.LATCHED, lane] = 0 if due == 1 else asked


@compiled
def run_all(
    now: FloatArray,
    rho: float,
    alpha: FloatArray,
    control: FloatArray,
    count: IntArray,
    pid: Any,
    form: Any,
) -> None:
    """Run every controller (link at the actuator: the controller sees every sample)."""
    for lane in range(now.shape[1]):
        m = count[R.SINCE_RUN, lane]
        step = alpha[min(m, len(alpha) - 1)]
        run_lane(lane, now[R.MEASUREMENT, lane], now[R.SETPOINT, lane], rho, float(m), step, control, pid, form)


@compiled
def run_asked(
    now: FloatArray,
    updated: IntArray,
    rho: float,
    alpha: FloatArray,
    control: FloatArray,
    count: IntArray,
    pid: Any,
    form: Any,
) -> None:
    """Run the controllers that got a message, or may run without one, on the measurement they last received."""
    for lane in range(now.shape[1]):
        r = now[R.SETPOINT, lane]
        moved = form[R.FOLLOW_SETPOINT] == 1 and abs(r - control[R.SETPOINT_THEN, lane]) > pid[R.SETPOINT_CHANGE]
        if updated[lane] == 1:
            control[R.RECEIVED, lane] = now[R.MEASUREMENT, lane]
        if updated[lane] == 1 or form[R.BETWEEN_RUN] == 1 or moved:
            m = count[R.SINCE_RUN, lane]
            step = alpha[min(m, len(alpha) - 1)]
            run_lane(lane, control[R.RECEIVED, lane], r, rho, float(m), step, control, pid, form)
            control[R.COMMAND, lane] = control[R.WOULD, lane]
            count[R.SINCE_RUN, lane] = 0


@compiled
def send_commands(updated: IntArray, control: FloatArray) -> None:
    """Commands travel only on an update (link at the actuator)."""
    for lane in range(len(updated)):
        control[R.COMMAND, lane] = control[R.WOULD, lane] if updated[lane] == 1 else control[R.COMMAND, lane]


@compiled
def remember(now: FloatArray, sent: FloatArray, since: IntArray, updated: IntArray) -> None:
    """Keep what was sent, and count the samples since."""
    for lane in range(len(since)):
        if updated[lane] == 1:
            for row in range(now.shape[0]):
                sent[row, lane] = now[row, lane]
    for lane in range(len(since)):
        since[lane] = 1 if updated[lane] == 1 else since[lane] + 1


@compiled
def note(
    u: float,
    now: FloatArray,
    updated: IntArray,
    control: FloatArray,
    count: IntArray,
    past: FloatArray,
    inputs: FloatArray,
    out_y: FloatArray,
    out_u: FloatArray,
    out_updated: Any,
) -> None:
    """Write the sample down: row views of the histories and of the results."""
    for lane in range(len(updated)):
        away = control[R.DEVIATION, lane]
        past[lane] = away
        inputs[lane] = u + away
        out_u[lane] = u + away
        out_y[lane] = now[R.MEASUREMENT, lane]
        out_updated[lane] = updated[lane]
        count[R.SINCE_RUN, lane] += 1


@compiled
def recall(past: FloatArray, places: IntArray, acting: FloatArray) -> None:
    """Fetch δ[k−d] and δ[k−d−1] of every lane; `places` are their slots and move on by one."""
    ring = past.shape[0]
    for lane in range(past.shape[1]):
        late = places[lane]
        later = late - 1 if late > 0 else ring - 1
        acting[0, lane] = past[late, lane]
        acting[1, lane] = past[later, lane]
        places[lane] = late + 1 if late + 1 < ring else 0


@compiled
def occupied(A: FloatArray) -> Any:
    """1 where any lane has a non-zero entry, shape (n, n): chains of lags are triangular, and zeros need no work."""
    n = A.shape[0]
    used = np.zeros((n, n), dtype=np.uint8)
    for i in range(n):
        for j in range(n):
            for lane in range(A.shape[2]):
                used[i, j] = 1 if A[i, j, lane] != 0.0 else used[i, j]
    return used


@compiled
def advance(
    used: Any, A: FloatArray, B0: FloatArray, B1: FloatArray, acting: FloatArray, dx: FloatArray, following: FloatArray
) -> None:
    """dx⁺ = A dx + B0 δ[k−d] + B1 δ[k−d−1] (2.1); δ is zero before the span."""
    n, lanes = dx.shape
    for i in range(n):
        for lane in range(lanes):
            following[i, lane] = B0[i, lane] * acting[0, lane] + B1[i, lane] * acting[1, lane]
        for j in range(n):
            if used[i, j] == 1:
                for lane in range(lanes):
                    following[i, lane] += A[i, j, lane] * dx[j, lane]
    for i in range(n):
        for lane in range(lanes):
            dx[i, lane] = following[i, lane]


_F1, _F2, _F3 = types.float64[::1], types.float64[:, ::1], types.float64[:, :, ::1]
_I1, _I2 = types.int64[::1], types.int64[:, ::1]
_IN1 = types.Array(types.float64, 1, "C", readonly=True)
_SPAN = types.void(
    _IN1, _IN1, _IN1, _IN1, _F2, types.int64, types.int64,
    _F3, _F2, _F2, _F2, _I1, _I1, types.float64,
    _F1, _I1, _F1,
    RULE_TYPE, types.int64, _F2, _I1, _I1,
    types.boolean, _F2, _F1, _F1, _F1, types.int64, types.float64,
    _F2, _F2, types.uint8[:, ::1],
)  # fmt: skip


@compiled_as(_SPAN)
def replay_span(
    y: FloatArray, r: FloatArray, u: FloatArray, rho: FloatArray, noise: FloatArray, start: int, stop: int,
    A: FloatArray, B0: FloatArray, B1: FloatArray, C: FloatArray, delay: IntArray, column: IntArray, quantum: float,
    pid: FloatArray, form: IntArray, alpha: FloatArray,
    fires: Callable[..., Any], memory_rows: int, settings: FloatArray, gap: IntArray, silence: IntArray,
    predicting: bool, dA: FloatArray, dB0: FloatArray, dB1: FloatArray, dC: FloatArray, d_delay: int, floor: float,
    out_y: FloatArray, out_u: FloatArray, out_updated: Any,
) -> None:  # fmt: skip
    """Replay one span over all lanes.

    Parameters
    ----------
    y, r, u, rho : ndarray, shape (N,)
        The record, and what the controller does not explain of u.
    noise : ndarray, shape (N, Q); column : ndarray, shape (lanes,)
        Small perturbations of y; lane l adds column[l], and column 0 is zero.
    A : (n, n, lanes); B0, B1, C : (n, lanes); delay : (lanes,)
    dA … floor
        The device's own model, shared by all lanes; used when `predicting`.
    out_y, out_u, out_updated : ndarray, shape (N, lanes)
        Rows start…stop−1 are written.
    """
    n, lanes = C.shape
    law, shape = settings_of(pid), choices_of(form)
    used = occupied(A)
    quiet = leading_zeros(column)
    dn = len(dC)
    ring = delay.max() + 2
    past = np.zeros((ring, lanes))
    inputs = np.zeros((d_delay + 2, lanes))
    places = (ring - delay) % ring
    acting = np.zeros((2, lanes))
    dx = np.zeros((n, lanes))
    following = np.zeros((n, lanes))
    device = np.zeros((2 * dn, lanes))
    device_next = np.zeros((2 * dn, lanes))
    offset = np.zeros((2, lanes))
    now = np.zeros((R.SIGNALS, lanes))
    sent = np.zeros((R.SIGNALS, lanes))
    memory = np.zeros((memory_rows, lanes))
    control = np.zeros((R.CONTROL_ROWS, lanes))
    count = np.zeros((R.COUNT_ROWS, lanes), dtype=np.int64)
    since = np.zeros(lanes, dtype=np.int64)
    updated = np.zeros(lanes, dtype=np.int64)
    fired = np.zeros(lanes, dtype=np.uint8)
    for k in range(start, stop):
        first = k == start
        t = k - start
        observe(y[k], r[k], noise[k], column, quiet, quantum, C, dx, now)
        if first:
            begin(control, count, now, u[k], law, shape)
            offset[0, :] = now[R.MEASUREMENT, :]
        elif shape[R.LINK_ACTUATOR] == 1:
            run_all(now, rho[k], alpha, control, count, law, shape)
            count[R.SINCE_RUN, :] = 0
        if predicting:
            predict(now, device, offset, dC)
        watch(now, control, shape)
        fires(now, sent, since, memory, settings, fired)
        decide(first, since, fired, gap, silence, count, updated)
        if shape[R.LINK_ACTUATOR] == 1:
            send_commands(updated, control)
        elif not first:
            run_asked(now, updated, rho[k], alpha, control, count, law, shape)
        if predicting:
            correct(now, updated, device, offset, dC, floor)
        remember(now, sent, since, updated)
        if not first:
            move(control, u[k], law)
        note(
            u[k], now, updated, control, count, past[t % ring], inputs[t % len(inputs)], out_y[k], out_u[k],
            out_updated[k],
        )  # fmt: skip
        recall(past, places, acting)
        advance(used, A, B0, B1, acting, dx, following)
        if predicting:
            advance_device(device, device_next, offset, inputs, t, u[start], dA, dB0, dB1, d_delay)
