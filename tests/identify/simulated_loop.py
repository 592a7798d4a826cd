"""A simulated loop whose controller is known: first-order plant with delay, plain-Python control law.

The control law is written here a second time, from the method's equations 3.1–3.4 with an update at every sample, so
that an error in the program's own is not repeated.
"""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np

from auditor.controllers.pid import Pid
from auditor.identify.plant import Load, Plant
from auditor.logs.record import Record, Span
from auditor.loop import Actuator, ControllerSettings, LogSource, Loop, Signal, Signals

PERIOD = 60.0
LAG, GAIN, DELAY = 20.0, 0.5, 3  # samples, measurement unit / actuator unit, samples


def first_order(lag: float = LAG, gain: float = GAIN, delay: int = DELAY) -> Plant:
    """Return the plant as identification would hand it over; `lag` in samples."""
    a = math.exp(-1.0 / lag)
    return Plant(
        A=np.array([[a]]),
        B0=np.array([gain * (1 - a)]),
        B1=np.array([0.0]),
        C=np.array([1.0]),
        delay=delay,
        structure="lags",
        delay_s=delay * PERIOD,
        gain=gain,
        gain_per_s=None,
        time_constants_s=(lag * PERIOD,),
        load=Load(entry="input", phi=0.99, walk=0.0, noise=0.01),
    )


class Law:
    """The recorded controller, one sample at a time; `early_freeze` False keeps the command of a frozen step."""

    def __init__(self, pid: Pid, e: float, y: float, r: float, u: float) -> None:
        self.pid, self.e, self.D, self.u = pid, e, 0.0, u
        self.s = self._slope(e, y)
        self.I = u - pid.gain * (e + (pid.setpoint_weight - 1) * r)

    def _slope(self, e: float, y: float) -> float:
        return e if self.pid.derivative_on == "error" else -y

    def step(self, y: float, r: float, extra: float = 0.0) -> float:
        """Return the actuator's position."""
        pid, e = self.pid, r - y
        b = {"forward": self.e, "backward": e, "trapezoid": 0.5 * (self.e + e)}[pid.integral]
        increment = 0.0 if math.isinf(pid.integral_time) else pid.gain * PERIOD / pid.integral_time * b
        s, Tf = self._slope(e, y), pid.derivative_time / pid.derivative_filter
        self.D = (Tf * self.D + pid.gain * pid.derivative_time * (s - self.s)) / (Tf + PERIOD)
        rest = pid.gain * (e + (pid.setpoint_weight - 1) * r) + self.D + extra
        v = rest + self.I + increment
        beyond = (v > pid.high and increment > 0) or (v < pid.low and increment < 0)
        if pid.anti_windup == "freeze" and beyond:
            increment, v = 0.0, rest + self.I
        self.I += increment
        command = min(max(v, pid.low), pid.high)
        if pid.anti_windup == "back-calculation" and not math.isinf(pid.integral_time):
            share = 1.0 if pid.tracking_time == 0 else min(1.0, PERIOD / pid.tracking_time)
            self.I += (command - v) * share
        step = pid.max_rate * PERIOD
        self.u = command if math.isinf(step) else self.u + min(max(command - self.u, -step), step)
        self.e, self.s = e, s
        return self.u


def simulate(
    pid: Pid,
    *,
    n: int = 4000,
    seed: int = 1,
    load: float = 1.0,
    noise: float = 0.02,
    setpoint_steps: int = 0,
    feedforward: float = 0.0,
    setpoint: float = 2.0,
    start: float = 50.0,
) -> Record:
    """Return the record of the loop; `load` is the deviation of a slow input disturbance [actuator unit]."""
    rng = np.random.default_rng(seed)
    w = np.zeros(n)
    shocks = rng.standard_normal(n) * load * math.sqrt(1 - 0.98**2)
    for k in range(1, n):
        w[k] = 0.98 * w[k - 1] + shocks[k]
    v = noise * rng.standard_normal(n)
    r = np.full(n, setpoint)
    for k in np.sort(rng.integers(1, n, setpoint_steps)):
        r[k:] += rng.choice([-0.5, 0.5])
    a = math.exp(-1.0 / LAG)
    x, y, u = 0.0, np.zeros(n), np.zeros(n)
    law: Law | None = None
    for k in range(n):
        y[k] = setpoint + x + v[k]
        if law is None:
            u[0], law = start, Law(pid, r[0] - y[0], y[0], r[0], start)
        else:
            u[k] = law.step(y[k], r[k], feedforward * w[k])
        late = u[k - DELAY] if k >= DELAY else start
        x = a * x + GAIN * (1 - a) * (late - start + w[k])
    return record_of(y, r, u, pid, w=w[None, :] if feedforward else None)


def record_of(y: np.ndarray, r: np.ndarray, u: np.ndarray, pid: Pid, w: np.ndarray | None = None) -> Record:
    """Return signals as one unbroken record with the controller's limits."""
    return Record(
        period=PERIOD,
        start=0,
        y=y,
        r=r,
        u=u,
        w=np.zeros((0, len(y))) if w is None else w,
        valid=np.ones(len(y), dtype=np.bool_),
        spans=(Span(0, len(y)),),
        log_step=PERIOD,
        low=pid.low,
        high=pid.high,
        max_rate=pid.max_rate,
    )


def late(record: Record, skew: int) -> Record:
    """Return the record with its actuator's column logged `skew` samples late."""
    u = np.roll(record.u, skew)
    kept = Span(max(0, skew), len(record) + min(0, skew))
    return replace(record, u=u, spans=(kept,))


def rounded(record: Record, step: float) -> Record:
    """Return the record with a rounded actuator."""
    return replace(record, u=np.round(record.u / step) * step, u_quantum=step)


def loop_file(controller: ControllerSettings | None = None) -> Loop:
    """Return a loop whose file states `controller`, or nothing about it."""
    return Loop(
        name="pool",
        period=PERIOD,
        log=LogSource(paths=("pool.csv",), folder=Path(".")),
        signals=Signals(
            measurement=Signal(column="level"), setpoint=Signal(column="target"), actuator=Actuator(column="gate")
        ),
        controller=controller,
    )
