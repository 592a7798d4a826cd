"""Records of simulated first-order loops and points of the estimator's family, for the tests of the estimator."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from auditor.arrays import FloatArray, read_only
from auditor.controllers.pid import Pid
from auditor.logs.record import Record, Span

PERIOD = 5.0  # s
LAG, GAIN, DELAY = 30.0, 0.8, 6.5  # samples, measurement unit / actuator unit, samples
CONTROLLER = Pid(gain=2.0, integral_time=LAG * PERIOD)


def record_of(y: FloatArray, u: FloatArray, r: FloatArray | None = None, **more: object) -> Record:
    """A record of one span."""
    N = len(y)
    values = {
        "period": PERIOD, "start": 0, "y": read_only(y), "u": read_only(u), "w": np.zeros((0, N)),
        "r": read_only(np.zeros(N) if r is None else r), "valid": np.ones(N, dtype=bool), "spans": (Span(0, N),),
    }  # fmt: skip
    return Record(**(values | more))  # type: ignore[arg-type]


def loop_record(N: int = 6000, moves: int = 6, seed: int = 1, noise: float = 0.02) -> Record:
    """PI loop around one lag with a delay of a fraction of samples, AR(1) load at the input, setpoint steps."""
    rng = np.random.default_rng(seed)
    whole, share = int(DELAY), DELAY - int(DELAY)
    a, late = math.exp(-1.0 / LAG), math.exp(-(1.0 - share) / LAG)
    u, y, r = np.zeros(N + whole + 2), np.zeros(N), np.zeros(N)
    for start in np.linspace(0, N, moves + 1, dtype=int)[:-1]:
        r[start:] = rng.choice([-1.0, 1.0]) * rng.uniform(1.0, 2.0) if moves else 0.0
    x = load = integral = 0.0
    for k in range(N):
        y[k] = x + noise * rng.normal()
        e = r[k] - y[k]
        integral += CONTROLLER.gain / LAG * e
        u[k + whole + 1] = CONTROLLER.gain * e + integral
        load = 0.98 * load + 0.05 * rng.normal()
        x = a * x + GAIN * ((1.0 - late) * u[k + 1] + (late - a) * u[k] + (1.0 - a) * load)
    return record_of(y, u[whole + 1 : whole + 1 + N].copy(), r)


def reversed_action(record: Record) -> Record:
    """The same loop with an actuator that works the other way."""
    return replace(record, u=read_only(-record.u))


def random_point(rng: np.random.Generator, m: int) -> FloatArray:
    """A point inside the bounds with fast enough lags that its response can be followed for a few hundred samples."""
    return np.array([
        rng.uniform(-4.0, -1.0), rng.uniform(-4.0, -0.5), rng.uniform(0.5, 3.5), rng.uniform(0.0, 12.0),
        rng.uniform(-5.0, -1.0), rng.uniform(-10.0, -3.0), rng.uniform(-3.0, 6.0),
        rng.uniform(-15.0, 15.0) if m % 2 else 0.0,
    ])  # fmt: skip
