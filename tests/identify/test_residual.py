"""The record comes back from its controller, and what the controller does not explain is kept."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from simulated_loop import PERIOD, Law, first_order, late, record_of, rounded, simulate

from auditor.controllers.pid import INTEGRALS, Pid
from auditor.identify.alignment import shift_actuator
from auditor.identify.residual import (
    anti_windup_of,
    choose_anti_windup,
    controller_residual,
    explained_by_disturbances,
    explained_by_error,
    null_replay,
)
from auditor.logs.record import Record, Span

PLANT = first_order()
OTHER_PLANT = first_order(lag=30.0, gain=0.7, delay=5)
PI = Pid(gain=5.0, integral_time=1200.0)
LIMITED = replace(PI, low=48.5, high=51.0)

CONTROLLERS = {
    **{form: replace(PI, integral=form) for form in INTEGRALS},
    "proportional": Pid(gain=5.0),
    "limited": LIMITED,
    "freeze": replace(LIMITED, anti_windup="freeze"),
    "no anti-windup": replace(LIMITED, anti_windup="none"),
    "tracking": replace(LIMITED, tracking_time=700.0),
    "slewing": replace(LIMITED, max_rate=0.3 / PERIOD),
    "derivative": replace(PI, derivative_time=240.0, derivative_filter=5.0),
    "on error": replace(PI, derivative_time=240.0, derivative_filter=5.0, derivative_on="error"),
    "weight": replace(PI, setpoint_weight=0.6),
}


def residual_by_hand(record: Record, pid: Pid) -> np.ndarray:
    """The method's recipe in plain Python, for back-calculation at once and no slew limit."""
    step = pid.integral_gain * PERIOD
    rho, resolution = np.zeros(len(record)), record.u_quantum or 1e-12 * np.max(np.abs(record.u))
    e, u = record.e, record.u
    integral = u[0] - pid.gain * e[0]
    for k in range(1, len(record)):
        integral += step * e[k]
        v = pid.gain * e[k] + integral
        explained = abs(min(max(v + rho[k - 1], pid.low), pid.high) - u[k]) <= resolution
        rho[k] = rho[k - 1] if explained else u[k] - v
        integral += u[k] - v - rho[k]
    return rho


@pytest.mark.parametrize("name", CONTROLLERS)
def test_the_record_comes_back_from_its_own_controller(name: str) -> None:
    pid = CONTROLLERS[name]
    record = simulate(pid, load=1.5, setpoint_steps=6)
    # Floating point only, whatever the plant.
    assert null_replay(record, pid, PLANT) < 1e-6
    assert null_replay(record, pid, OTHER_PLANT) < 1e-6
    assert np.max(np.abs(controller_residual(record, pid).rho)) < 1e-9


@pytest.mark.parametrize("name", CONTROLLERS)
@pytest.mark.parametrize("share", [0.75, 1.25])
def test_injecting_the_residual_returns_the_record_with_wrong_gains(name: str, share: float) -> None:
    true = CONTROLLERS[name]
    record = simulate(true, load=1.5, setpoint_steps=6)
    wrong = replace(true, gain=share * true.gain)
    rho = controller_residual(record, wrong).rho
    # A million times what injection leaves; the loop without anti-windup sits at its limits most of the time.
    assert null_replay(record, wrong, OTHER_PLANT) > 1e-3
    assert null_replay(record, wrong, OTHER_PLANT, rho) < 1e-9


def test_the_residual_follows_the_method_step_by_step() -> None:
    record = simulate(LIMITED, load=1.5)
    wrong = replace(LIMITED, gain=6.0)
    found = controller_residual(record, wrong)
    # The same sums in another order.
    np.testing.assert_allclose(found.rho, residual_by_hand(record, wrong), rtol=0, atol=1e-9)
    assert np.any(np.diff(found.rho) == 0)
    assert np.any(np.diff(found.rho) != 0)


def test_the_command_is_what_the_controller_computes_before_its_limits() -> None:
    record = simulate(LIMITED, load=1.5)
    v = controller_residual(record, LIMITED).v
    limited = record.u == 51.0
    assert np.all(v[limited] >= 51.0)
    # Inside the limits the command is the actuator, to floating point.
    free = (record.u > 48.5) & (record.u < 51.0)
    np.testing.assert_allclose(v[free], record.u[free], rtol=1e-12)


def test_rounding_of_the_actuator_is_not_a_residual() -> None:
    record = rounded(simulate(PI), 0.5)
    rho = controller_residual(record, PI).rho
    assert np.all(rho == 0.0)
    np.testing.assert_array_equal(rho, residual_by_hand(record, PI))


def test_each_span_starts_afresh_and_nothing_is_said_outside() -> None:
    record = replace(simulate(PI, n=600), spans=(Span(0, 200), Span(300, 600)))
    found = controller_residual(record, replace(PI, gain=6.0))
    assert found.rho[0] == found.rho[300] == 0.0
    assert np.all(np.isnan(found.rho[200:300]))
    alone = controller_residual(replace(record, spans=(Span(300, 600),)), replace(PI, gain=6.0))
    assert np.array_equal(alone.rho[300:], found.rho[300:])


def test_null_replay_grows_with_the_gain_error() -> None:
    record = simulate(PI, n=8000)
    nulls = [null_replay(record, replace(PI, gain=share * 5.0), PLANT) for share in (1.02, 1.1, 1.25)]
    assert nulls == sorted(nulls)
    # Published for another bench: 2 % in both gains gives 0.019, 25 % gives 0.21.
    assert 0.005 < nulls[0] < 0.05
    assert 0.1 < nulls[2] < 0.4


def test_null_replay_is_the_replay_by_hand() -> None:
    record = simulate(PI, n=400)
    wrong = replace(PI, gain=6.0)
    law, x, y = Law(wrong, record.e[0], record.y[0], record.r[0], record.u[0]), 0.0, record.y.copy()
    away = np.zeros(400)
    for k in range(400):
        y[k] = record.y[k] + x
        away[k] = (law.step(y[k], record.r[k]) if k else record.u[0]) - record.u[k]
        x = float(PLANT.A[0, 0]) * x + float(PLANT.B0[0]) * (away[k - PLANT.delay] if k >= PLANT.delay else 0.0)
    expected = np.std(y - record.y) / np.std(record.e)
    assert null_replay(record, wrong, PLANT) == pytest.approx(expected, rel=1e-9)


def test_a_derivative_cut_in_its_motion_is_forgiven_after_the_warm_up() -> None:
    pid = CONTROLLERS["derivative"]
    record = replace(simulate(pid, n=3000), spans=(Span(0, 1000), Span(1100, 3000)))
    assert null_replay(record, pid, PLANT) > 1e-3
    # 400 samples are ten closed-loop time constants.
    assert null_replay(record, pid, PLANT, warm_up=400) < 1e-3


def test_a_diverging_replay_is_infinite() -> None:
    record = simulate(PI)
    assert math.isinf(null_replay(record, replace(PI, gain=-5.0), PLANT))


def test_a_record_without_spans_or_movement_has_no_null_replay() -> None:
    record = simulate(PI, n=100)
    assert math.isinf(null_replay(replace(record, spans=()), PI, PLANT))
    still = record_of(np.full(50, 2.0), np.full(50, 2.0), np.full(50, 50.0), PI)
    assert null_replay(still, PI, PLANT) == 0.0


@pytest.mark.parametrize("name", ["limited", "freeze", "no anti-windup", "tracking"])
def test_the_anti_windup_is_chosen_by_what_it_returns(name: str) -> None:
    true = CONTROLLERS[name]
    record = simulate(true, load=1.5)
    start = replace(LIMITED, anti_windup="none" if name == "limited" else "back-calculation")
    by_residual, by_replay = anti_windup_of(record, start), choose_anti_windup(record, start, PLANT)
    assert by_residual.anti_windup == by_replay.anti_windup == true.anti_windup
    assert null_replay(record, by_replay, PLANT) < 1e-6


def test_the_anti_windup_is_left_alone_without_saturation() -> None:
    record = simulate(PI)
    assert choose_anti_windup(record, PI, PLANT) is PI
    assert anti_windup_of(record, PI) is PI


@pytest.mark.parametrize("name", ["backward", "limited", "derivative"])
def test_wrong_gains_are_explained_by_the_error(name: str) -> None:
    true = CONTROLLERS[name]
    record = simulate(true, load=1.5)
    rho = controller_residual(record, replace(true, gain=1.25 * true.gain)).rho
    # The derivative's memory is cut after three samples; the rest is exact.
    assert explained_by_error(rho, record) > (0.99 if name == "derivative" else 1 - 1e-9)


def test_feedforward_is_explained_by_its_disturbance_only() -> None:
    record = simulate(PI, feedforward=-0.5)
    rho = controller_residual(record, PI).rho
    assert explained_by_disturbances(rho, record) > 1 - 1e-9
    assert explained_by_error(rho, record) > 1 - 1e-9
    assert explained_by_error(rho, replace(record, w=np.zeros((0, len(record))))) < 0.9


def test_a_hand_on_the_actuator_is_not_explained_by_the_error() -> None:
    record = simulate(PI)
    rng = np.random.default_rng(3)
    bumps = np.cumsum(np.where(rng.random(len(record)) < 0.01, rng.choice([-1.0, 1.0], len(record)), 0.0))
    rho = controller_residual(replace(record, u=record.u + bumps), PI).rho
    # 4000 rows and five regressors explain 0.1 % by chance.
    assert explained_by_error(rho, record) < 0.02


def test_far_too_large_gains_do_not_explain_an_actuator_that_obeys_something_else() -> None:
    record = simulate(PI)
    elsewhere = 50.0 + 0.1 * np.cumsum(np.random.default_rng(4).standard_normal(len(record)))
    rho = controller_residual(replace(record, u=elsewhere), replace(PI, gain=500.0)).rho
    # Nearly all of rho is the stated controller's own answer to the error; none of the actuator is.
    assert explained_by_error(rho, replace(record, u=elsewhere)) < 0.02


def test_no_residual_is_not_explained() -> None:
    record = simulate(PI, n=100)
    assert explained_by_error(np.zeros(100), record) == 0.0


def test_a_skewed_record_comes_back_after_shifting() -> None:
    skewed = late(simulate(PI), 1)
    # Published for another bench: one sample late gives 0.04.
    assert null_replay(skewed, PI, PLANT) > 0.02
    assert null_replay(shift_actuator(skewed, 1), PI, PLANT) < 1e-6
