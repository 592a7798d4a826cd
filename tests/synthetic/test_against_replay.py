"""A record replayed with its exact plant gives what the loop would really have done (method, §2).

The replay here is the slow oracle, which the compiled replay equals bit for bit; the simulation runs the plant in
full and shares no code with either.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from auditor.controllers import Pid
from auditor.synthetic import chain, resonance, send_on_area, send_on_delta, simulate
from tests import naive

PERIOD, N = 2.0, 600

LOOPS = {
    "lags": (chain((6.0, 40.0), gain=0.5, delay_s=7.3, load_stage=1), Pid(gain=3.0, integral_time=40.0)),
    "integrator": (chain((15.0, math.inf), gain=2e-3, delay_s=5.0), Pid(gain=12.0, integral_time=150.0)),
    "resonance": (resonance(gain=0.8, frequency=0.1, damping=0.3), Pid(gain=0.4, integral_time=15.0)),
}
CONTROLLERS = [
    {},
    {"integral": "forward"},
    {"integral": "trapezoid", "gap_integral": "current"},
    {"gap_integral": "saturating", "low": -2.0, "high": 2.0},
    {"low": -1.5, "high": 1.5},
    {"low": -1.5, "high": 1.5, "anti_windup": "freeze"},
    {"low": -1.5, "high": 1.5, "tracking_time": 20.0},
    {"max_rate": 0.2, "low": -3.0, "high": 3.0},
    {"derivative_time": 4.0, "derivative_filter": 5.0},
    {"setpoint_weight": 0.5, "error_deadband": 0.05},
]


@pytest.mark.parametrize("loop", LOOPS)
@pytest.mark.parametrize("changed", CONTROLLERS, ids=str)
@pytest.mark.parametrize("rule", ["send-on-delta", "send-on-area"])
def test_the_exact_plant_returns_the_truth(loop, changed, rule):
    plant, pid = LOOPS[loop]
    settings = {name: getattr(pid, name) for name in ("gain", "integral_time")} | {"integral": "backward"} | changed
    pid = Pid(**settings)
    rng = np.random.default_rng(7)
    r = np.where(np.arange(N) > N // 2, 0.6, 0.0)
    load = np.cumsum(rng.normal(0, 0.06, N * 4)).reshape(N, 4)
    noise = rng.normal(0, 0.02, N)
    decide, values = (
        (send_on_delta(0.15, shortest=2, longest=40), {"delta": 0.15})
        if rule == "send-on-delta"
        else (send_on_area(1.1, PERIOD, longest=40), {"area": 1.1})
    )
    record = simulate(plant, pid, r, load, noise, period=PERIOD)
    truth = simulate(plant, pid, r, load, noise, period=PERIOD, decide=decide)
    sampled = plant.sampled(PERIOD)
    y, u, updated = naive.replay(
        record.y.tolist(), r.tolist(), record.u.tolist(), [0.0] * N,
        (sampled.A.tolist(), sampled.B0.tolist(), sampled.B1.tolist(), sampled.C.tolist(), sampled.delay),
        pid, rule, values, PERIOD, min_gap=2 if rule == "send-on-delta" else 0, max_silence=40,
    )  # fmt: skip
    assert 0.02 < np.mean(updated) < 0.9
    np.testing.assert_array_equal(updated, truth.updated)
    # Rounding grows with the length of the record, and the event loop may stretch it.
    np.testing.assert_allclose(y, truth.y, atol=1e-8)
    np.testing.assert_allclose(u, truth.u, atol=1e-8)
