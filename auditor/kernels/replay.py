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
from auditor.kernels.deviation import advance, leading_zeros, occupied, recall
from auditor.kernels.device import advance_device, correct, predict
from auditor.kernels.jit import RULE_TYPE, compiled, compiled_as


@compiled
def lane_arrays(n: int, lanes: int, ring: int, memory_rows: int) -> Any:
    """State of all lanes at rest: past and acting δ, dx and its successor, what a rule sees, the controllers."""
    signals = (R.SIGNALS, lanes)
    return (
        np.zeros((ring, lanes)), np.zeros((2, lanes)), np.zeros((n, lanes)), np.zeros((n, lanes)), np.zeros(signals),
        np.zeros(signals), np.zeros((memory_rows, lanes)), np.zeros((R.CONTROL_ROWS, lanes)),
    )  # fmt: skip


@compiled
def device_arrays(n: int, lanes: int, ring: int) -> Any:
    """State of the devices' models at rest: state and successor, offset and load, and past positions."""
    state = (2 * n, lanes)
    return np.zeros(state), np.zeros(state), np.zeros((2, lanes)), np.zeros((ring, lanes))


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
    k: int,
    u: float,
    slot: int,
    now: FloatArray,
    control: FloatArray,
    past: FloatArray,
    out_y: FloatArray,
    out_u: FloatArray,
) -> None:
    """Write sample k down, in the history's slot and in the results."""
    for lane in range(now.shape[1]):
        past[slot, lane] = control[R.DEVIATION, lane]
    for lane in range(now.shape[1]):
        out_u[k, lane] = u + control[R.DEVIATION, lane]
    for lane in range(now.shape[1]):
        out_y[k, lane] = now[R.MEASUREMENT, lane]


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
    ring = 2
    while ring < max(delay.max(), d_delay) + 2:
        ring *= 2
    past, acting, dx, following, now, sent, memory, control = lane_arrays(n, lanes, ring, memory_rows)
    device, device_next, offset, positions = device_arrays(len(dC), lanes, ring)
    since = np.zeros(lanes, dtype=np.int64)
    # A controller that runs on messages alone has run when the last one came.
    apart = between or shape[R.LINK_ACTUATOR] == 1
    since_run = np.zeros(lanes, dtype=np.int64) if apart else since
    latched = np.zeros(lanes, dtype=np.uint8)
    fired = np.zeros(lanes, dtype=np.uint8)
    which = np.zeros(lanes + 1, dtype=np.int64)
    for k in range(start, stop):
        first, t = k == start, k - start
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
        note(k, u[k], t % ring, now, control, past, out_y, out_u)
        if apart:
            since_run += 1
        recall(past, t, delay, acting)
        advance(used, A, B0, B1, acting, dx, following)
        if predicting:
            positions[t % ring, :] = out_u[k, :]
            new, old = positions[(t - d_delay) % ring], positions[(t - d_delay - 1) % ring]
            advance_device(device, device_next, offset, new, old, u[start], t, dA, dB0, dB1, d_delay)
