"""Speed of the compiled replay as ratios within one run; `pytest -m benchmark -s` prints them."""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import pytest

from auditor.arrays import read_only
from auditor.controllers.pid import Pid
from auditor.identify.plant import Load, Plant
from auditor.kernels.replay import replay_span
from auditor.logs.record import Record, Span
from auditor.replay.bench import form_array, make_bench
from auditor.replay.lanes import NEVER, _device
from auditor.rules import RULES
from tests import naive

pytestmark = pytest.mark.benchmark

SAMPLES, LANES = 20_000, 119  # 128 with the naive and the perturbed lanes


def lag_plant(rng: np.random.Generator) -> Plant:
    a, b = rng.uniform(0.9, 0.99), rng.uniform(0.5, 0.8)
    return Plant(
        A=np.array([[a, 0.0], [1 - b, b]]), B0=np.array([0.6 * (1 - a), 0.0]), B1=np.array([0.4 * (1 - a), 0.0]),
        C=np.array([0.0, 1.0]), delay=int(rng.integers(1, 6)), structure="lags", delay_s=1.0, gain=1.0, gain_per_s=None,
        time_constants_s=(1.0,), load=Load(entry="input", phi=0.9, walk=0.0, noise=0.0),
    )  # fmt: skip


def best_of(times: int, work: Callable[[], object]) -> float:
    """Smallest processor time of several runs: other work on the machine only adds."""
    spent = []
    for _ in range(times):
        begun = time.process_time()
        work()
        spent.append(time.process_time() - begun)
    return min(spent)


def test_compiled_replay_against_a_plain_python_loop() -> None:
    rng = np.random.default_rng(2)
    y = read_only(0.1 * np.cumsum(rng.normal(0, 0.1, SAMPLES)) + rng.normal(0, 0.1, SAMPLES))
    zeros = read_only(np.zeros(SAMPLES))
    record = Record(
        period=1.0, start=0, y=y, r=zeros, u=read_only(-0.9 * y), w=np.zeros((0, SAMPLES)),
        valid=np.ones(SAMPLES, dtype=bool), spans=(Span(0, SAMPLES),),
    )  # fmt: skip
    controller = Pid(gain=0.9, integral_time=30.0)
    bench = make_bench(record, controller, [lag_plant(rng) for _ in range(LANES)], 0, 20.0)
    lanes, rule = len(bench.delay), RULES["send-on-delta"]
    out = np.zeros((SAMPLES, lanes)), np.zeros((SAMPLES, lanes)), np.zeros((SAMPLES, lanes), dtype=np.uint8)
    settings = np.full((1, lanes), 0.3)
    gap, silence = np.zeros(lanes, dtype=np.int64), np.full(lanes, NEVER, dtype=np.int64)
    form, device = form_array(controller, "sensor", "error", "hold"), _device(bench, rule)

    def compiled() -> None:
        replay_span(
            record.y, record.r, record.u, bench.rho, bench.noise, 0, SAMPLES, bench.A, bench.B0, bench.B1, bench.C,
            bench.delay, bench.column, 0.0, bench.pid, form, bench.alpha, rule.fires, 0, settings, gap, silence,
            False, *device, *out,
        )  # fmt: skip

    plant = bench.plants[0]
    lists = [a.tolist() for a in (record.y, record.r, record.u, bench.rho)]
    matrices = (plant.A.tolist(), plant.B0.tolist(), plant.B1.tolist(), plant.C.tolist(), plant.delay)

    def plain() -> None:
        naive.replay(*lists, matrices, controller, "send-on-delta", {"delta": 0.3}, 1.0)

    compiled()
    fast = best_of(5, compiled) / (SAMPLES * lanes)
    slow = best_of(3, plain) / SAMPLES
    print(f"\ncompiled {1e9 * fast:.1f} ns per lane-step, plain Python {1e6 * slow:.2f} µs: ratio {slow / fast:.0f}")
    # Measured 200 to 320 on a shared two-core machine, where either side may be slowed down; 300 is the aim.
    assert slow / fast >= 200
