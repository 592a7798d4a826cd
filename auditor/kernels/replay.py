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
        value = y + now[R.MEASUREMENT, lane]
        now[R.MEASUREMENT, lane] = value
        now[R.ERROR, lane] = r - value
    for lane in range(quiet, dx.shape[1]):
        value = y + noise[column[lane]] + now[R.MEASUREMENT, lane]
        now[R.MEASUREMENT, lane] = value
        now[R.ERROR, lane] = r - value
    if now[R.SETPOINT, 0] != r:
        now[R.SETPOINT, :] = r


@compiled
def predict(now: FloatArray, device: FloatArray, offset: FloatArray, C: FloatArray) -> None:
    """ŷ of the device's model: its state (rows 0…n−1 of `device`) seen through C, plus the offset set at updates."""
    for lane in range(now.shape[1]):
        now[R.PREDICTED, lane] = offset[0, lane]
    for i in range(len(C)):
        c = C[i]
        for lane in range(now.shape[1]):
            now[R.PREDICTED, lane] += c * device[i, lane]


@compiled
def correct(
    now: FloatArray, which: IntArray, updates: int, device: FloatArray, offset: FloatArray, C: FloatArray, floor: float
) -> None:
    """At an update both ends learn y: set the offset, and blame a constant load for what the model missed.

    The missed part divided by the plant's response to a unit load since the last update is the load's step
    (Lunze & Lehmann 2010, disturbance estimator); the response is floored so that noise is not amplified.
    """
    n = len(C)
    for at in range(updates):
        lane = which[at]
        missed = now[R.MEASUREMENT, lane] - now[R.PREDICTED, lane]
        response = 0.0
        for i in range(n):
            response += C[i] * device[n + i, lane]
            device[n + i, lane] = 0.0
        response = response if abs(response) > abs(floor) else floor
        offset[0, lane] += missed
        offset[1, lane] += missed / response


@compiled
def advance_device(
    device: FloatArray, following: FloatArray, offset: FloatArray, new: FloatArray, old: FloatArray, u0: float, t: int,
    A: FloatArray, B0: FloatArray, B1: FloatArray, delay: int,
) -> None:  # fmt: skip
    """One period of the device's model, driven by the positions since the span began and by its load estimate.

    `new` and `old` are the positions d and d + 1 samples ago; before the span the model rests.
    """
    n, lanes = len(B0), device.shape[1]
    for i in range(n):
        b0, b1 = B0[i], B1[i]
        for lane in range(lanes):
            recent = new[lane] - u0 if t >= delay else 0.0
            before = old[lane] - u0 if t > delay else 0.0
            following[i, lane] = b0 * (recent + offset[1, lane]) + b1 * (before + offset[1, lane])
            following[n + i, lane] = b0 + b1
        for j in range(n):
            a = A[i, j]
            if a != 0.0:
                for lane in range(lanes):
                    following[i, lane] += a * device[j, lane]
                    following[n + i, lane] += a * device[n + j, lane]
    for i in range(2 * n):
        for lane in range(lanes):
            device[i, lane] = following[i, lane]


@compiled
def watch(now: FloatArray, control: FloatArray, form: Any) -> None:
    """Fill the row a rule watches."""
    if form[R.WATCH] == R.WATCH_COMMAND:
        for lane in range(now.shape[1]):
            now[R.WATCHED, lane] = control[R.WOULD, lane]
    else:
        row = R.MEASUREMENT if form[R.WATCH] == R.WATCH_MEASUREMENT else R.ERROR
        for lane in range(now.shape[1]):
            now[R.WATCHED, lane] = now[row, lane]


@compiled
def decide(
    first: bool, since: IntArray, fired: Any, gap: IntArray, silence: IntArray, latched: Any, which: IntArray
) -> int:
    """Guards around the rule: first sample, min_gap (the request stays latched), max_silence, then the rule.

    Lists the lanes that update in `which` and returns how many they are.
    """
    updates = 0
    forced = 1 if first else 0
    for lane in range(len(since)):
        # Bits instead of `and`/`or`: no jumps.
        asked = (1 if fired[lane] != 0 else 0) | (1 if latched[lane] != 0 else 0)
        overdue = 1 if since[lane] >= silence[lane] else 0
        allowed = 1 if since[lane] >= gap[lane] else 0
        due = forced | (allowed & (asked | overdue))
        latched[lane] = asked & (1 - due)
        which[updates] = lane
        updates += due
    return updates


@compiled
def run_all(
    now: FloatArray,
    rho: float,
    alpha: FloatArray,
    control: FloatArray,
    since_run: IntArray,
    pid: Any,
    form: Any,
) -> None:
    """Run every controller (link at the actuator: the controller sees every sample)."""
    for lane in range(now.shape[1]):
        m = since_run[lane]
        step = alpha[min(m, len(alpha) - 1)]
        run_lane(lane, now[R.MEASUREMENT, lane], now[R.SETPOINT, lane], rho, float(m), step, control, pid, form)
        since_run[lane] = 0


@compiled
def receive(now: FloatArray, which: IntArray, updates: int, control: FloatArray) -> None:
    """Hand the measurement to the controllers that got a message."""
    for at in range(updates):
        lane = which[at]
        control[R.RECEIVED, lane] = now[R.MEASUREMENT, lane]


@compiled
def run_one(
    lane: int,
    now: FloatArray,
    rho: float,
    alpha: FloatArray,
    control: FloatArray,
    since_run: IntArray,
    pid: Any,
    form: Any,
) -> None:
    """Run one controller on the measurement it last received, and let its command act."""
    m = since_run[lane]
    step = alpha[min(m, len(alpha) - 1)]
    run_lane(lane, control[R.RECEIVED, lane], now[R.SETPOINT, lane], rho, float(m), step, control, pid, form)
    control[R.COMMAND, lane] = control[R.WOULD, lane]
    since_run[lane] = 0


@compiled
def run_unasked(
    now: FloatArray, rho: float, alpha: FloatArray, control: FloatArray, since_run: IntArray, pid: Any, form: Any
) -> None:
    """Run the controllers that got no message but run between messages, or follow a setpoint that has moved."""
    for lane in range(now.shape[1]):
        moved = abs(now[R.SETPOINT, lane] - control[R.SETPOINT_THEN, lane]) > pid[R.SETPOINT_CHANGE]
        if since_run[lane] > 0 and (form[R.BETWEEN_RUN] == 1 or (form[R.FOLLOW_SETPOINT] == 1 and moved)):
            run_one(lane, now, rho, alpha, control, since_run, pid, form)


@compiled
def send_commands(which: IntArray, updates: int, control: FloatArray) -> None:
    """Commands travel only on an update (link at the actuator)."""
    for at in range(updates):
        control[R.COMMAND, which[at]] = control[R.WOULD, which[at]]


@compiled
def remember(now: FloatArray, sent: FloatArray, since: IntArray, which: IntArray, updates: int, row: Any) -> None:
    """Keep what was sent, count the samples since, and mark the update in the results' row."""
    for at in range(updates):
        lane = which[at]
        for signal in range(now.shape[0]):
            sent[signal, lane] = now[signal, lane]
        since[lane] = 0
        row[lane] = 1
    for lane in range(len(since)):
        since[lane] += 1


@compiled
def note(
    u: float,
    now: FloatArray,
    control: FloatArray,
    past: FloatArray,
    out_y: FloatArray,
    out_u: FloatArray,
) -> None:
    """Write the sample down: row views of the history and of the results."""
    for lane in range(len(past)):
        away = control[R.DEVIATION, lane]
        past[lane] = away
        out_u[lane] = u + away
        out_y[lane] = now[R.MEASUREMENT, lane]


@compiled
def recall(past: FloatArray, t: int, delay: IntArray, acting: FloatArray) -> None:
    """Fetch δ[k−d] and δ[k−d−1] of every lane; `past` has a power of two of slots, so that a mask wraps around."""
    mask = past.shape[0] - 1
    for lane in range(past.shape[1]):
        late = t - delay[lane]
        acting[0, lane] = past[np.uint64(late & mask), lane]
        acting[1, lane] = past[np.uint64((late - 1) & mask), lane]


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
        first = used[i, 0] == 1
        for lane in range(lanes):
            driven = B0[i, lane] * acting[0, lane] + B1[i, lane] * acting[1, lane]
            following[i, lane] = driven + A[i, 0, lane] * dx[0, lane] if first else driven
        for j in range(1, n):
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
        Rows start…stop−1 are written; `out_updated` must be zero before.
    """
    n, lanes = C.shape
    law, shape = settings_of(pid), choices_of(form)
    used = occupied(A)
    quiet = leading_zeros(column)
    between = shape[R.BETWEEN_RUN] == 1 or shape[R.FOLLOW_SETPOINT] == 1
    dn = len(dC)
    ring = 2
    while ring < max(delay.max(), d_delay) + 2:
        ring *= 2
    past = np.zeros((ring, lanes))
    acting = np.zeros((2, lanes))
    dx = np.zeros((n, lanes))
    following = np.zeros((n, lanes))
    device = np.zeros((2 * dn, lanes))
    device_next = np.zeros((2 * dn, lanes))
    positions = np.zeros((ring, lanes))
    offset = np.zeros((2, lanes))
    now = np.zeros((R.SIGNALS, lanes))
    sent = np.zeros((R.SIGNALS, lanes))
    memory = np.zeros((memory_rows, lanes))
    control = np.zeros((R.CONTROL_ROWS, lanes))
    since = np.zeros(lanes, dtype=np.int64)
    # A controller that runs on messages alone has run when the last one came.
    apart = between or shape[R.LINK_ACTUATOR] == 1
    since_run = np.zeros(lanes, dtype=np.int64) if apart else since
    latched = np.zeros(lanes, dtype=np.uint8)
    fired = np.zeros(lanes, dtype=np.uint8)
    which = np.zeros(lanes + 1, dtype=np.int64)
    for k in range(start, stop):
        first = k == start
        t = k - start
        observe(y[k], r[k], noise[k], column, quiet, quantum, C, dx, now)
        if first:
            begin(control, now, u[k], law, shape)
            offset[0, :] = now[R.MEASUREMENT, :]
        elif shape[R.LINK_ACTUATOR] == 1:
            run_all(now, rho[k], alpha, control, since_run, law, shape)
        if predicting:
            predict(now, device, offset, dC)
        watch(now, control, shape)
        fires(now, sent, since, memory, settings, fired)
        updates = decide(first, since, fired, gap, silence, latched, which)
        if shape[R.LINK_ACTUATOR] == 1:
            send_commands(which, updates, control)
        elif not first:
            receive(now, which, updates, control)
            for at in range(updates):
                run_one(which[at], now, rho[k], alpha, control, since_run, law, shape)
            if between:
                run_unasked(now, rho[k], alpha, control, since_run, law, shape)
        if predicting:
            correct(now, which, updates, device, offset, dC, floor)
        remember(now, sent, since, which, updates, out_updated[k])
        if not first:
            move(control, u[k], law)
        note(u[k], now, control, past[t % ring], out_y[k], out_u[k])
        if apart:
            since_run += 1
        recall(past, t, delay, acting)
        advance(used, A, B0, B1, acting, dx, following)
        if predicting:
            positions[t % ring, :] = out_u[k, :]
            new, old = positions[(t - d_delay) % ring], positions[(t - d_delay - 1) % ring]
            advance_device(device, device_next, offset, new, old, u[start], t, dA, dB0, dB1, d_delay)
