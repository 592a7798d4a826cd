"""The controller comes back from logs whose controller is known."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from simulated_loop import late, loop_file, record_of, rounded, simulate

from auditor.controllers.pid import INTEGRALS, Pid
from auditor.identify.alignment import shift_actuator
from auditor.identify.controller import Recovery, recover_controller
from auditor.logs.record import CAUSES, Record, Span
from auditor.loop import ControllerSettings

PI = Pid(gain=5.0, integral_time=1200.0)
LIMITED = replace(PI, low=48.5, high=51.0)
FILTERED = Pid(gain=6.0, integral_time=1200.0, derivative_time=240.0, derivative_filter=5.0)


def from_log(record: Record) -> Recovery:
    return recover_controller(record, loop_file())


def assert_settings(found: Pid, true: Pid, tolerance: float) -> None:
    for name in ("gain", "integral_time", "derivative_time", "derivative_filter", "setpoint_weight"):
        assert getattr(found, name) == pytest.approx(getattr(true, name), rel=tolerance), name


@pytest.mark.parametrize("form", INTEGRALS)
def test_a_pi_controller_comes_back_from_an_exact_log_in_its_own_form(form: str) -> None:
    true = replace(PI, integral=form)
    found = from_log(simulate(true))
    assert found.usable
    assert found.controller.integral == form
    # Floating point only: differences of numbers near 50 keep 14 of 16 digits.
    assert_settings(found.controller, true, 1e-9)
    assert found.relative_residual < 1e-9


def test_settings_that_are_not_round_come_back_as_the_equivalent_backward_form() -> None:
    true = Pid(gain=5.345678, integral_time=1234.5678, integral="forward")
    found = from_log(simulate(true)).controller
    step = true.integral_gain * 60.0
    assert found.integral == "backward"
    assert found.gain + step == pytest.approx(true.gain, rel=1e-9)
    assert found.integral_gain == pytest.approx(true.integral_gain, rel=1e-9)


def test_a_pure_integral_controller_is_written_in_the_forward_form() -> None:
    true = Pid(gain=0.3, integral_time=60.0, integral="forward")
    found = from_log(simulate(true)).controller
    assert found.integral == "forward"
    assert_settings(found, true, 1e-9)


@pytest.mark.parametrize("skew", [-2, -1, 1, 2])
def test_a_shifted_actuator_column_is_found(skew: int) -> None:
    found = from_log(late(simulate(PI), skew))
    assert found.skew_samples == skew
    assert_settings(found.controller, PI, 1e-9)
    table = dict(found.lag_table)
    # At any other lag the measurement's noise alone leaves a good part of the actuator's movement.
    assert all(table[lag] > 0.1 for lag in table if lag != skew)


@pytest.mark.parametrize("skew", [-2, 3])
def test_shifting_undoes_the_skew_and_trims_the_spans(skew: int) -> None:
    true = simulate(PI, n=200)
    shifted = shift_actuator(late(true, skew), skew)
    (span,) = shifted.spans
    assert len(span) == 200 - 2 * abs(skew)
    assert np.array_equal(shifted.u[span.start : span.stop], true.u[span.start : span.stop])
    assert [finding.kind for finding in shifted.findings] == ["skew"]


def test_shifting_drops_spans_that_vanish() -> None:
    record = replace(simulate(PI, n=200), spans=(Span(0, 2), Span(10, 12), Span(20, 200)))
    assert shift_actuator(record, 3).spans == (Span(20, 197),)


@pytest.mark.parametrize("derivative_on", ["measurement", "error"])
def test_a_pid_controller_with_filter_comes_back(derivative_on: str) -> None:
    true = replace(FILTERED, derivative_on=derivative_on)
    found = from_log(simulate(true, setpoint_steps=8)).controller
    assert found.derivative_on == derivative_on
    # The filter is searched, and the search ends where the residual is floating point.
    assert_settings(found, true, 1e-6)


def test_a_setpoint_weight_comes_back() -> None:
    true = replace(PI, setpoint_weight=0.6)
    assert_settings(from_log(simulate(true, setpoint_steps=8)).controller, true, 1e-9)


def test_a_setpoint_weight_beside_a_derivative_comes_back() -> None:
    true = replace(FILTERED, setpoint_weight=0.5)
    assert_settings(from_log(simulate(true, setpoint_steps=8)).controller, true, 1e-6)


@pytest.mark.parametrize(
    ("scheme", "tracking"), [("back-calculation", 0.0), ("back-calculation", 700.0), ("freeze", 0.0), ("none", 0.0)]
)
def test_a_saturated_log_gives_gains_and_anti_windup(scheme: str, tracking: float) -> None:
    true = replace(LIMITED, anti_windup=scheme, tracking_time=tracking)
    record = simulate(true, load=1.5)
    assert 0.1 < np.mean((record.u == true.low) | (record.u == true.high)) < 0.9
    found = from_log(record).controller
    # Least absolute residuals pass exactly through the rows that obey the law.
    assert_settings(found, true, 1e-6)
    assert found.anti_windup == scheme
    assert found.tracking_time == pytest.approx(tracking, rel=1e-6)


def test_conditional_integration_needs_least_absolute_residuals() -> None:
    record = simulate(replace(LIMITED, anti_windup="freeze"), load=1.5)
    found = from_log(record)
    assert "least absolute residuals" in found.reasons[0]
    free = (record.u > 48.5) & (record.u < 51.0)
    rows = np.flatnonzero(free[1:] & free[:-1]) + 1
    columns = np.stack([np.diff(record.e)[rows - 1], record.e[rows]], axis=1)
    gain, step = np.linalg.lstsq(columns, np.diff(record.u)[rows - 1], rcond=None)[0]
    # Least squares on the same rows are off by more than the tolerance of the other fit.
    assert abs(gain * 60.0 / step / 1200.0 - 1.0) > 1e-4


def test_slewing_samples_do_not_spoil_the_gains() -> None:
    true = replace(LIMITED, max_rate=0.3 / 60.0)
    record = simulate(true, load=1.5)
    assert np.mean(np.isclose(np.abs(np.diff(record.u)), 0.3)) > 0.01
    assert_settings(from_log(record).controller, true, 1e-9)


def test_a_rounded_actuator_gives_gains_from_levels() -> None:
    found = from_log(rounded(simulate(PI, n=8000), 0.05))
    assert "levels" in found.reasons[0]
    # 8000 rows average the rounding of 0.05 (5 % of the actuator's deviation) to about 1e-4.
    assert_settings(found.controller, PI, 1e-3)


def test_a_rounded_pid_log_gives_gains_and_filter() -> None:
    found = from_log(rounded(simulate(FILTERED, n=10_000), 0.05)).controller
    assert_settings(replace(found, derivative_filter=5.0), FILTERED, 3e-3)
    # The filter shows only in moves that the rounding nearly hides.
    assert found.derivative_filter == pytest.approx(5.0, rel=0.03)


def test_white_noise_on_the_position_gives_gains_from_levels() -> None:
    record = simulate(PI, n=8000)
    noisy = replace(record, u=record.u + 0.05 * np.random.default_rng(5).standard_normal(len(record)))
    found = from_log(noisy)
    assert "levels" in found.reasons[0]
    # The same noise would leave about 10 times as much on differences.
    assert_settings(found.controller, PI, 3e-3)


def test_a_proportional_controller_comes_back_with_its_bias() -> None:
    found = from_log(simulate(Pid(gain=5.0), setpoint_steps=8))
    assert math.isinf(found.controller.integral_time)
    assert found.controller.gain == pytest.approx(5.0, rel=1e-9)
    # The record starts at 50 with an error of one noise deviation (0.02 × gain 5).
    assert found.bias == pytest.approx(50.0, abs=0.5)
    assert not found.own_law


@pytest.mark.parametrize("settings", [None, ControllerSettings(gain=5.0)])
def test_a_static_law_without_setpoint_moves_is_said_to_be_all_there_is(settings: ControllerSettings | None) -> None:
    found = recover_controller(simulate(Pid(gain=5.0)), loop_file(settings))
    assert found.usable
    assert found.own_law
    assert any("only the controller's own law" in reason for reason in found.reasons)


def test_a_noisy_static_law_may_be_the_controllers_or_the_plants() -> None:
    rng = np.random.default_rng(7)
    record = simulate(Pid(gain=5.0))
    noise = 0.05 * float(np.std(record.u)) * rng.standard_normal(len(record))
    assert from_log(replace(record, u=record.u + noise)).own_law
    # The mirror image: a flow that follows its valve at once and is measured with 5 % noise. What looks like a
    # controller of gain −1/0.01 is the plant's inverse.
    valve = record.u
    flow = 0.01 * valve + 0.05 * 0.01 * float(np.std(valve)) * rng.standard_normal(len(record))
    found = from_log(replace(record, y=flow, u=valve, r=np.full(len(record), float(np.mean(flow)))))
    assert found.controller.gain == pytest.approx(-100.0, rel=0.01)  # 5 % noise biases by 0.25 %
    assert found.own_law


def test_rare_moves_off_a_static_law_show_that_it_is_the_controllers() -> None:
    record = simulate(Pid(gain=5.0), n=6000)
    u = record.u.copy()
    for start in range(500, 6000, 1000):
        u[start : start + 40] += 3.0 * float(np.std(u))
    found = from_log(replace(record, u=u))
    assert found.controller.gain == pytest.approx(5.0, rel=1e-6)
    assert found.usable
    assert not found.own_law


def test_rounding_is_not_taken_for_integral_action() -> None:
    found = from_log(rounded(simulate(Pid(gain=5.0)), 0.05))
    assert math.isinf(found.controller.integral_time)


def test_feedforward_from_a_declared_disturbance_does_not_bend_the_gains() -> None:
    found = from_log(simulate(PI, feedforward=-0.5))
    assert_settings(found.controller, PI, 1e-9)
    assert any("feedforward" in reason and "-0.500" in reason for reason in found.reasons)


def test_a_manual_stretch_does_not_bend_the_gains() -> None:
    record = simulate(PI, n=6000)
    u = record.u.copy()
    u[3000:3300] = u[3000]
    assert_settings(from_log(replace(record, u=u)).controller, PI, 1e-6)


def test_spans_and_unusable_samples_are_respected() -> None:
    record = simulate(PI, n=6000)
    valid, u = record.valid.copy(), record.u.copy()
    valid[500:502], u[500:502] = False, u[499]
    u[2000:2100], u[2500:2600] = 7.0, 93.0
    record = replace(record, u=u, valid=valid, spans=(Span(0, 2000), Span(2100, 2500), Span(2600, 6000)))
    found = from_log(record)
    assert found.relative_residual < 1e-9
    assert_settings(found.controller, PI, 1e-9)


@pytest.mark.parametrize("form", INTEGRALS)
def test_the_file_gives_the_gains_and_the_log_the_rest(form: str) -> None:
    true = replace(LIMITED, integral=form, anti_windup="freeze")
    settings = ControllerSettings(gain=5.0, integral_time=1200.0)
    found = recover_controller(late(simulate(true, load=1.5), 1), loop_file(settings))
    assert found.source == "file"
    assert (found.controller.gain, found.controller.integral_time) == (5.0, 1200.0)
    assert (found.controller.integral, found.controller.anti_windup) == (form, "freeze")
    assert found.skew_samples == 1


def test_what_the_file_states_is_not_searched() -> None:
    settings = ControllerSettings(gain=5.0, integral_time=1200.0, integral="forward", anti_windup="none")
    found = recover_controller(simulate(LIMITED, load=1.5), loop_file(settings)).controller
    assert (found.integral, found.anti_windup) == ("forward", "none")


def test_wrong_gains_in_the_file_are_kept_and_the_log_s_are_told() -> None:
    settings = ControllerSettings(gain=6.25, integral_time=1200.0)
    found = recover_controller(late(simulate(PI), 1), loop_file(settings))
    assert found.controller.gain == 6.25
    assert found.skew_samples == 1
    assert any("does not agree" in reason and "5.000" in reason for reason in found.reasons)


def test_an_error_dead_band_is_taken_from_the_file() -> None:
    record = simulate(PI, n=2000)
    e = np.where(np.abs(record.e) <= 0.05, 0.0, record.e)
    u = 50.0 + 5.0 * e + 0.25 * np.cumsum(e)
    settings = ControllerSettings(gain=5.0, integral_time=1200.0, error_deadband=0.05)
    found = recover_controller(replace(record, u=u), loop_file(settings))
    assert found.relative_residual < 1e-9
    assert found.controller.error_deadband == 0.05


def test_a_coarse_log_gives_approximate_gains() -> None:
    record = simulate(PI, n=8000)
    recorded = np.arange(len(record)) % 4 == 2
    latest = np.maximum.accumulate(np.where(recorded, np.arange(len(record)), 2))
    coarse = replace(record, y=record.y[latest], u=record.u[latest], valid=recorded, log_step=240.0)
    found = from_log(coarse)
    # Measured with trapezoid sums on bench logs: median 1 %, worst 8.6 %.
    assert_settings(found.controller, PI, 0.05)
    assert any("approximate" in reason for reason in found.reasons)


@pytest.mark.parametrize("settings", [None, ControllerSettings(gain=1.8)])
def test_a_copy_of_the_measurement_is_refused(settings: ControllerSettings | None) -> None:
    record = simulate(PI, n=1000)
    found = recover_controller(replace(record, u=1.8 * record.y), loop_file(settings))
    assert not found.usable
    assert found.refusal is not None
    assert "copy of the measurement" in found.refusal.what


def test_a_copy_with_an_offset_is_refused_where_the_setpoint_moves() -> None:
    record = simulate(PI, n=1000, setpoint_steps=4)
    found = from_log(replace(record, u=1.8 * record.y + 32.0))
    assert found.refusal is not None
    assert "copy of the measurement" in found.refusal.what


def test_an_actuator_that_obeys_nothing_is_refused_with_a_likely_cause() -> None:
    record = simulate(PI, n=4000)
    wandering = np.cumsum(np.random.default_rng(2).standard_normal(len(record)))
    found = from_log(replace(record, u=wandering))
    assert not found.usable
    assert found.refusal is not None
    assert "cascade" in found.refusal.do
    assert found.relative_residual > 0.9


def test_a_dead_loop_is_refused() -> None:
    record = simulate(PI, n=1000)
    assert "never moves" in from_log(replace(record, u=np.full(1000, 3.0))).reasons[0]


def test_a_loop_that_dies_half_way_keeps_its_controller() -> None:
    record = simulate(PI, n=3000)
    y, u = record.y.copy(), record.u.copy()
    y[2000:], u[2000:] = y[2000], u[2000]
    assert_settings(from_log(replace(record, y=y, u=u)).controller, PI, 1e-9)


def test_an_actuator_always_at_its_limit_is_refused() -> None:
    record = replace(simulate(PI, n=1000), high=40.0)
    found = from_log(record)
    assert found.refusal is not None
    assert "too few samples" in found.refusal.what


@pytest.mark.parametrize("n", [1, 2, 10])
def test_a_handful_of_samples_is_refused(n: int) -> None:
    r = np.full(n, 2.0)
    found = from_log(record_of(r + 0.01 * np.arange(n), r, 50.0 + np.arange(n), PI))
    assert not found.usable


def test_the_actuator_of_a_negative_controller_keeps_its_sign() -> None:
    record = simulate(PI)
    found = from_log(replace(record, y=4.0 - record.y, r=4.0 - record.r)).controller
    assert_settings(found, replace(PI, gain=-5.0), 1e-9)


def test_shifting_moves_the_causes_of_lost_samples_along() -> None:
    record = simulate(PI, n=200)
    valid = np.ones(200, dtype=np.bool_)
    valid[50:60] = False
    cause = np.where(valid, 0, CAUSES.index("manual")).astype(np.int8)
    shifted = shift_actuator(replace(record, valid=valid, cause=cause), 2)
    assert np.flatnonzero(~shifted.valid).tolist() == [*range(48, 60), 198, 199]
    assert shifted.cause is not None
    assert np.all(shifted.cause[48:60] == CAUSES.index("manual"))
    assert np.all(shifted.cause[198:] == CAUSES.index("gap"))


def test_a_log_with_too_few_rows_in_a_span_says_how_far_apart_its_rows_are() -> None:
    record = replace(simulate(PI, n=400), spans=(), log_step=600.0)
    found = from_log(record)
    assert found.refusal is not None
    assert "every 10 min" in found.refusal.do


@pytest.mark.parametrize("quantum", [None, 0.05])
def test_the_file_s_controller_stands_where_the_log_says_nothing(quantum: float | None) -> None:
    record = replace(simulate(PI, n=400), spans=(), u_quantum=quantum)
    found = recover_controller(record, loop_file(ControllerSettings(gain=5.0, integral_time=1200.0)))
    assert found.usable
    assert (found.controller.gain, found.skew_samples, found.relative_residual) == (5.0, 0, math.inf)
