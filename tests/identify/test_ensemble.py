"""Record in, plants out: recovered from a loop whose truth is known, the same for any number of workers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from auditor.errors import CannotAnswerError
from auditor.identify import ensemble as en
from auditor.identify.ensemble import estimate
from auditor.identify.loop_math import closed_loop_poles, closed_loop_time_constant
from auditor.identify.plant import Plant
from auditor.logs.record import Span
from tests.identify.spectral_cases import CONTROLLER, DELAY, GAIN, LAG, PERIOD, loop_record, reversed_action


@pytest.fixture(scope="module")
def record():
    return loop_record()


@pytest.fixture(scope="module")
def ensemble(record):
    return estimate(record, CONTROLLER, plant="self-regulating", workers=2)


def response(plant: Plant, n: int) -> np.ndarray:
    """Response to a unit step of the actuator, first n samples."""
    x, y = np.zeros(plant.order), np.zeros(n)
    for k in range(n):
        y[k] = plant.C @ x
        x = plant.A @ x + plant.B0 * (k >= plant.delay) + plant.B1 * (k >= plant.delay + 1)
    return y


def test_the_true_step_response_lies_within_the_draws(ensemble) -> None:
    at = np.array([10, 20, 40])
    draws = np.array([response(plant, 41)[at] for plant in ensemble.plants])
    truth = GAIN * (1.0 - np.exp(-(at - DELAY) / LAG))
    # Six setpoint steps of some 50 noise deviations: each draw is within a few per cent.
    assert np.all(draws.min(axis=0) <= truth)
    assert np.all(draws.max(axis=0) >= truth)
    np.testing.assert_allclose(np.median(draws, axis=0), truth, rtol=0.05)


def test_figures_of_the_recorded_loop_are_those_of_the_best_draw(ensemble) -> None:
    best = ensemble.plants[ensemble.best]
    assert best.log_posterior == max(plant.log_posterior for plant in ensemble.plants)
    slowest = abs(closed_loop_poles(best, CONTROLLER, PERIOD)[0])
    assert ensemble.tau_cl_s == pytest.approx(-PERIOD / np.log(slowest), rel=1e-12)
    # Known loop: lag cancelled by the integral time, gain margin 2.9; Ms of it worked out from the true plant.
    w = np.linspace(1e-3, np.pi, 200_000)
    z = np.exp(1j * w)
    a = np.exp(-1 / LAG)
    late = np.exp(-0.5 / LAG)
    G = GAIN * ((1 - late) + (late - a) / z) / (z - a) / z**6
    S = 1 / (1 + G * CONTROLLER.gain * (1 + 1 / LAG / (1 - 1 / z)))
    assert ensemble.peak_sensitivity == pytest.approx(np.abs(S).max(), rel=0.03)  # draws spread by 1–2 %


def test_two_runs_of_twelve_draws(ensemble) -> None:
    assert len(ensemble.plants) + ensemble.dropped == 24
    assert 1 <= ensemble.modes <= len(ensemble.plants)
    assert all(np.isfinite(closed_loop_time_constant(plant, CONTROLLER, PERIOD)) for plant in ensemble.plants)
    assert not any(plant.integrating for plant in ensemble.plants)


def test_workers_and_the_sign_of_the_action_change_nothing(record, ensemble) -> None:
    turned = estimate(
        reversed_action(record), replace(CONTROLLER, gain=-CONTROLLER.gain), plant="self-regulating", workers=1
    )
    for one, other in zip(ensemble.plants, turned.plants, strict=True):
        assert one.parameters == other.parameters
        assert one.gain == -other.gain
        np.testing.assert_array_equal(one.C, -other.C)
    assert turned.best == ensemble.best
    assert turned.tau_cl_s == ensemble.tau_cl_s


def test_quick_is_the_first_run(record, ensemble) -> None:
    cut = replace(record, spans=(Span(0, 3000), Span(3010, 6000)))
    seen: list[float] = []
    quick = estimate(cut, CONTROLLER, plant="integrating", quick=True, progress=lambda stage, done: seen.append(done))
    assert len(quick.plants) + quick.dropped == 12
    assert all(plant.integrating and plant.gain_per_s > 0 for plant in quick.plants)
    assert seen[-1] == 1.0


def test_what_cannot_be_identified_is_said_before_any_work(record) -> None:
    with pytest.raises(CannotAnswerError, match="unstable without their controller"):
        estimate(record, CONTROLLER, plant="unstable")
    with pytest.raises(CannotAnswerError, match="long enough"):
        estimate(replace(record, spans=(Span(0, 100),)), CONTROLLER, plant=None)


def test_when_every_draw_is_unstable_nothing_is_answered(ensemble) -> None:
    wild = replace(CONTROLLER, gain=40.0)
    with pytest.raises(CannotAnswerError, match="could not have made this log"):
        en._ensemble(list(ensemble.plants), PERIOD, wild, 0)


def test_unstable_draws_are_dropped_and_counted(ensemble) -> None:
    one = ensemble.plants[ensemble.best]
    wild = replace(one, C=40.0 * one.C, log_posterior=one.log_posterior + 1.0)
    kept = en._ensemble([wild, one, wild], PERIOD, CONTROLLER, 3)
    assert kept.plants == (one,)
    assert (kept.dropped, kept.best, kept.masked) == (2, 0, 3)
