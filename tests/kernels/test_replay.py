"""The compiled replay against the plain-Python oracle, bit for bit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from auditor.arrays import read_only
from auditor.controllers.pid import Pid
from auditor.identify.plant import Load, Plant
from auditor.logs.record import Record, Span
from auditor.replay.bench import make_bench
from auditor.replay.lanes import guards, replay_lanes, unit_response
from auditor.replay.types import Setting
from auditor.rules import RULES
from tests import naive

PERIOD = 2.0
LOAD = Load(entry="input", phi=0.98, walk=0.0, noise=0.1)

VALUES = {
    "periodic": {"every": 4.0, "phase": 2.0},
    "send-on-delta": {"delta": 0.31},
    "level-crossing": {"spacing": 0.4, "hysteresis": 0.03, "origin": 0.1},
    "send-on-area": {"area": 1.7},
    "error-area": {"area": 2.9, "delta": 1.1},
    "linear-prediction": {"delta": 0.27, "window_s": 7.0},
    "model-prediction": {"delta": 0.29},
    "actuator-deadband": {"delta": 0.4},
}


def a_plant(order: int, rng: np.random.Generator) -> Plant:
    A = np.diag(rng.uniform(0.3, 1.0, order)) + np.tril(rng.uniform(0, 0.2, (order, order)), -1)
    return Plant(
        A=A, B0=rng.uniform(0, 0.1, order), B1=rng.uniform(0, 0.05, order), C=rng.uniform(0, 1, order),
        delay=int(rng.integers(0, 6)), structure="lags", delay_s=1.0, gain=1.0, gain_per_s=None,
        time_constants_s=(1.0,), load=LOAD,
    )  # fmt: skip


def a_record(n: int, rng: np.random.Generator, **more: object) -> Record:
    y = np.cumsum(rng.normal(0, 0.1, n)) * 0.5 + rng.normal(0, 0.1, n)
    r = np.where(np.arange(n) > n // 2, 0.8, 0.0)
    u = np.cumsum(rng.normal(0, 0.2, n))
    if more.get("u_quantum"):
        u = np.rint(u / 0.25) * 0.25
    return Record(
        period=PERIOD, start=0, y=read_only(y), r=read_only(r), u=read_only(u), w=np.zeros((0, n)),
        valid=np.ones(n, dtype=bool), spans=(Span(0, n),), **more,
    )  # fmt: skip


def oracle(bench, setting, lane):
    record, plant = bench.record, bench.plants[lane]
    rule = RULES[setting.rule]
    best = bench.plants[bench.best]
    floor = unit_response(best, max(1, round(bench.tau_cl_s / PERIOD)))
    matrices = lambda p: (p.A.tolist(), p.B0.tolist(), p.B1.tolist(), p.C.tolist(), p.delay)  # noqa: E731
    gap, silence = guards(setting, PERIOD)
    return naive.replay(
        record.y.tolist(), record.r.tolist(), record.u.tolist(), bench.rho.tolist(), matrices(plant), bench.controller,
        setting.rule, dict(setting.values), PERIOD, link=setting.link, signal=setting.signal, between=setting.between,
        min_gap=gap, max_silence=silence, y_step=record.y_quantum or 0.0, u_step=record.u_quantum or 0.0,
        r_step=0.999 * (record.r_quantum or 0.0), device=(*matrices(best), floor) if rule.predicts else None,
    )  # fmt: skip


def assert_same(bench, setting):
    lanes = replay_lanes(bench, setting)
    for lane in range(bench.draws):
        y, u, updated = oracle(bench, setting, lane)
        np.testing.assert_array_equal(lanes.y[:, lane], y)
        np.testing.assert_array_equal(lanes.u[:, lane], u)
        np.testing.assert_array_equal(lanes.updated[:, lane] == 1, updated)


def a_bench(seed=1, n=300, orders=(1, 3), record_options=None, rho=None, **controller):
    rng = np.random.default_rng(seed)
    record = a_record(n, rng, **(record_options or {}))
    pid = Pid(**{"gain": 0.9, "integral_time": 30.0, **controller})
    plants = [a_plant(order, rng) for order in orders]
    return make_bench(record, pid, plants, len(plants) - 1, 20.0, None if rho is None else rho(rng, n))


@pytest.mark.parametrize("name", list(RULES))
@pytest.mark.parametrize("link", ["sensor", "actuator"])
def test_every_rule_on_both_links_equals_the_oracle(name: str, link: str) -> None:
    bench = a_bench()
    assert_same(bench, Setting(rule=name, link=link, values=VALUES[name], min_gap_s=3.0, max_silence_s=60.0))


@pytest.mark.parametrize("integral", ["forward", "backward", "trapezoid"])
@pytest.mark.parametrize("gap_integral", ["held", "current", "saturating"])
def test_every_integral_equals_the_oracle(integral: str, gap_integral: str) -> None:
    bench = a_bench(integral=integral, gap_integral=gap_integral)
    assert_same(bench, Setting(rule="send-on-delta", values={"delta": 0.3}))


@pytest.mark.parametrize("anti_windup", ["back-calculation", "freeze", "none"])
@pytest.mark.parametrize("tracking_time", [0.0, 9.0])
def test_limits_slew_and_anti_windup_equal_the_oracle(anti_windup: str, tracking_time: float) -> None:
    bench = a_bench(anti_windup=anti_windup, tracking_time=tracking_time, low=-0.5, high=0.6, max_rate=0.06)
    assert_same(bench, Setting(rule="send-on-delta", values={"delta": 0.2}))


@pytest.mark.parametrize("derivative_on", ["measurement", "error"])
def test_derivative_weight_deadband_and_injection_equal_the_oracle(derivative_on: str) -> None:
    bench = a_bench(
        derivative_time=6.0, derivative_filter=5.0, derivative_on=derivative_on, setpoint_weight=0.6,
        error_deadband=0.05, rho=lambda rng, n: np.cumsum(rng.normal(0, 0.05, n)),
    )  # fmt: skip
    assert_same(bench, Setting(rule="send-on-delta", values={"delta": 0.2}))


@pytest.mark.parametrize("between", ["hold", "run"])
@pytest.mark.parametrize("signal", ["error", "measurement"])
def test_watched_signal_and_running_between_messages_equal_the_oracle(signal: str, between: str) -> None:
    bench = a_bench(record_options={"r_quantum": 0.1})
    assert_same(bench, Setting(rule="send-on-delta", values={"delta": 0.3}, signal=signal, between=between))


def test_quantised_measurement_and_actuator_equal_the_oracle() -> None:
    bench = a_bench(record_options={"y_quantum": 0.05, "u_quantum": 0.25})
    assert_same(bench, Setting(rule="send-on-delta", values={"delta": 0.3}))


@settings(max_examples=25, deadline=None)
@given(
    seed=st.integers(0, 10_000), name=st.sampled_from(sorted(RULES)), n=st.integers(1, 80),
    gap=st.sampled_from([None, 2.0, 5.0]), silence=st.sampled_from([None, 8.0, 40.0]),
)  # fmt: skip
def test_random_loops_equal_the_oracle(seed, name, n, gap, silence) -> None:
    bench = a_bench(seed=seed, n=n, orders=(1, 2, 4))
    assert_same(bench, Setting(rule=name, values=VALUES[name], min_gap_s=gap, max_silence_s=silence))


def test_a_lane_alone_equals_the_lane_among_others() -> None:
    together = a_bench(orders=(2, 3, 1))
    alone = make_bench(together.record, together.controller, together.plants[1:2], 0, 20.0)
    setting = Setting(rule="send-on-area", values={"area": 1.1})
    many, one = replay_lanes(together, setting), replay_lanes(alone, setting)
    np.testing.assert_array_equal(many.y[:, 1], one.y[:, 0])
    np.testing.assert_array_equal(many.updated[:, 1], one.updated[:, 0])


def test_a_span_starts_afresh() -> None:
    whole = a_bench(n=200)
    cut = a_bench(n=200)
    record = cut.record
    parts = Record(
        period=PERIOD, start=0, y=record.y, r=record.r, u=record.u, w=record.w, valid=record.valid,
        spans=(Span(0, 120), Span(130, 200)),
    )  # fmt: skip
    bench = make_bench(parts, cut.controller, cut.plants, cut.best, 20.0)
    setting = Setting(rule="send-on-delta", values={"delta": 0.3})
    lanes = replay_lanes(bench, setting)
    plain = whole.draws + 1  # the perturbed lanes scale with the record's own deviation
    np.testing.assert_array_equal(lanes.y[:120, :plain], replay_lanes(whole, setting).y[:120, :plain])
    assert np.isnan(lanes.y[120:130]).all()
    assert (lanes.updated[130] == 1).all()
    assert not lanes.updated[120:130].any()
