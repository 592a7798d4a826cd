"""The sampled plants against other people's discretisation, and their named figures."""

from __future__ import annotations

import math

import control
import numpy as np
import pytest
from scipy.signal import cont2discrete

from auditor.synthetic import Truth, chain, resonance
from auditor.synthetic.truth import pushes, sample

# Two routes through the matrix exponential differ by rounding only.
ROUNDING = 1e-12

PLANTS = {
    "one lag": chain((20.0,), gain=0.3),
    "three lags": chain((6.0, 32.0, 9.0), gain=0.55),
    "equal lags": chain((8.0, 8.0, 8.0)),
    "integrator behind a lag": chain((30.0, math.inf), gain=1e-3),
    "resonance": resonance(gain=2.0, frequency=0.4, damping=0.15),
}


def with_delay(plant: Truth, delay_s: float) -> Truth:
    return Truth(A=plant.A, B=plant.B, C=plant.C, E=plant.E, delay_s=delay_s)


@pytest.mark.parametrize("name", PLANTS)
def test_zero_order_hold_agrees_with_scipy(name):
    plant = PLANTS[name]
    A, B0, B1, d = sample(plant, 2.5)
    Ad, Bd, *_ = cont2discrete((plant.A, plant.B[:, None], plant.C[None, :], [[0.0]]), 2.5, method="zoh")
    np.testing.assert_allclose(A, Ad, atol=ROUNDING)
    np.testing.assert_allclose(B0, Bd[:, 0], atol=ROUNDING)
    assert not B1.any()
    assert d == 0


@pytest.mark.parametrize("name", PLANTS)
@pytest.mark.parametrize(("delay_s", "whole"), [(0.5, 0), (2.5, 1), (6.0, 2), (9.5, 3)])
def test_fractional_delay_agrees_with_a_fine_clock(name, delay_s, whole):
    plant, h, fine = with_delay(PLANTS[name], delay_s), 2.5, 0.5
    u = np.random.default_rng(3).normal(0, 1, 60)
    system = control.ss(plant.A, plant.B[:, None], plant.C[None, :], 0.0)
    held = np.concatenate([np.zeros(round(delay_s / fine)), np.repeat(u, round(h / fine))])
    fine_y = control.forced_response(control.c2d(system, fine, "zoh"), inputs=held[: 60 * round(h / fine)]).outputs
    sampled = plant.sampled(h)
    assert sampled.delay == whole
    x, y = np.zeros(sampled.order), []
    for k in range(60):
        y.append(sampled.C @ x)
        late = [u[k - i] if k >= i else 0.0 for i in (sampled.delay, sampled.delay + 1)]
        x = sampled.A @ x + sampled.B0 * late[0] + sampled.B1 * late[1]
    # Responses of order one, over 60 steps.
    np.testing.assert_allclose(y, fine_y[:: round(h / fine)], atol=1e-10)


def test_a_load_cut_into_parts_acts_as_on_a_finer_clock():
    plant = chain((6.0, 32.0, 9.0), load_stage=1, load_gain=-0.7)
    load = np.random.default_rng(4).normal(0, 1, (50, 4))
    A, fine = sample(plant, 2.0)[0], sample(plant, 0.5)[0]
    coarse_x, fine_x = np.zeros(3), np.zeros(3)
    coarse_push, fine_push = pushes(plant, load, 2.0), pushes(plant, load.reshape(-1), 0.5)
    for k in range(50):
        coarse_x = A @ coarse_x + coarse_push[k]
        for j in range(4):
            fine_x = fine @ fine_x + fine_push[4 * k + j]
        np.testing.assert_allclose(coarse_x, fine_x, atol=ROUNDING)
    assert plant.E.tolist() == [0.0, -0.7 / 32.0, 0.0]


def test_figures_of_a_plant_that_settles():
    plant = chain((6.0, 32.0, 9.0), gain=0.55, delay_s=9.0).sampled(2.0)
    assert plant.gain == pytest.approx(0.55, rel=1e-9)
    assert plant.gain_per_s is None
    assert plant.time_constants_s == pytest.approx((32.0, 9.0, 6.0))
    assert (plant.structure, plant.damping, plant.delay, plant.delay_s) == ("lags", None, 4, 9.0)


def test_figures_of_a_plant_that_integrates():
    plant = chain((180.0, math.inf, 30.0), gain=2e-4).sampled(60.0)
    assert plant.gain is None
    # The integrator ramps at `gain` per second; the lags around it have unit gain.
    assert plant.gain_per_s == pytest.approx(2e-4, rel=1e-9)
    assert plant.time_constants_s == pytest.approx((180.0, 30.0))


def test_equal_lags_are_no_resonance():
    plant = chain((8.0, 8.0, 8.0)).sampled(1.0)
    assert plant.structure == "lags"
    assert plant.time_constants_s == (8.0, 8.0, 8.0)


def test_figures_of_a_resonance():
    plant = resonance(gain=2.0, frequency=0.4, damping=0.15).sampled(1.0)
    assert plant.structure == "oscillatory"
    assert plant.damping == pytest.approx(0.15)
    assert plant.gain == pytest.approx(2.0)


def test_a_characteristic_scales_the_plant_by_its_slope_at_rest():
    plant = chain((4.0,), delay_s=0.6).resting(4.0, 70.0, lambda u: 10.5 * (u / 100) ** 2)
    assert plant.drive(70.0) == 0.0
    assert plant.drive(80.0) == pytest.approx(10.5 * (0.64 - 0.49))
    # Slope of 10.5 (u/100)² at 70: 0.147; a central difference of a parabola is exact.
    assert plant.sampled(0.5).gain == pytest.approx(0.147, rel=1e-6)
