"""The recorded loop's spectrum, poles and peak, against impulse responses and polynomials worked out apart."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from simulated_loop import Law

from auditor.controllers.pid import Pid
from auditor.identify import loop_math
from auditor.identify.family import family, to_plant
from auditor.identify.plant import Load, Plant
from tests.identify.spectral_cases import random_point

PERIOD = 60.0  # of the plain-Python control law
PI = Pid(gain=1.7, integral_time=900.0)
PID = Pid(gain=1.7, integral_time=900.0, derivative_time=240.0, derivative_filter=5.0)


def lag(a: float, b: float, delay: int = 0) -> Plant:
    return Plant(
        A=np.array([[a]]), B0=np.array([b]), B1=np.array([0.0]), C=np.array([1.0]), delay=delay, structure="lags",
        delay_s=0.0, gain=None, gain_per_s=None, time_constants_s=(), load=Load(entry="input", phi=0, walk=0, noise=0),
    )  # fmt: skip


@pytest.mark.parametrize("integral", ["forward", "backward", "trapezoid"])
@pytest.mark.parametrize("pid", [PI, PID])
def test_controller_spectrum_is_the_impulse_response_of_the_law(integral: str, pid: Pid) -> None:
    pid = replace(pid, integral=integral)
    law = Law(pid, 0.0, 0.0, 0.0, 0.0)
    u = np.array([law.step(0.0, 0.0)] + [law.step(-1.0 if k == 0 else 0.0, 0.0) for k in range(400)])
    w = np.array([0.01, 0.3, 1.0, 2.7])
    # The integral keeps its step for ever; its difference dies out with the derivative's filter.
    expected = np.exp(-1j * np.outer(w, np.arange(400))) @ np.diff(u) / (1.0 - np.exp(-1j * w))
    # Rounding of some 400 terms, divided by |1 − q| = 0.01.
    np.testing.assert_allclose(loop_math.controller_spectrum(pid, PERIOD, w), expected, rtol=1e-11)


@pytest.mark.parametrize("m", range(6))
def test_plant_spectrum_is_that_of_the_impulse_response(m: int) -> None:
    rng = np.random.default_rng(m)
    plant = to_plant(random_point(rng, m), (m, 0), PERIOD, 1.0, family(None, 0.01))
    response = np.zeros(4000)
    x = np.zeros(plant.order)
    for k in range(4000):
        response[k] = plant.C @ x
        x = plant.A @ x + plant.B0 * (k == plant.delay) + plant.B1 * (k == plant.delay + 1)
    w = np.array([0.02, 0.5, 2.0])
    expected = np.exp(-1j * np.outer(w, np.arange(4000))) @ response
    # The slowest lag, e^4 = 55 samples, has died to e^-73; what is left is rounding.
    np.testing.assert_allclose(loop_math.plant_spectrum(plant, w), expected, rtol=1e-9)


@pytest.mark.parametrize(
    ("integral", "zeros"), [("backward", [1.0, 0.0]), ("forward", [0.0, 1.0]), ("trapezoid", [0.5, 0.5])]
)
def test_poles_are_the_roots_of_the_characteristic_polynomial(integral: str, zeros: list[float]) -> None:
    a, b, d = 0.95, 0.04, 3
    pid = replace(PI, integral=integral)
    # 1 + b z^-(d+1)/(1 − a z^-1) · (K (1 − z^-1) + K h/Ti (zeros)) / (1 − z^-1) = 0
    open_loop = np.convolve([1.0, -a], [1.0, -1.0])
    numerator = pid.gain * (np.array([1.0, -1.0]) + PERIOD / pid.integral_time * np.array(zeros))
    characteristic = np.zeros(d + 3)
    characteristic[:3] += open_loop
    characteristic[d + 1 :] += b * numerator
    expected = np.sort(np.abs(np.roots(characteristic)))[::-1]
    found = np.abs(loop_math.closed_loop_poles(lag(a, b, d), pid, PERIOD))
    # Simple poles: eigenvalues and roots agree to rounding times a modest condition.
    np.testing.assert_allclose(found[:4], expected[:4], rtol=1e-9)


def test_poles_with_derivative_are_the_zeros_of_one_plus_the_loop() -> None:
    plant = to_plant(random_point(np.random.default_rng(5), 2), (2, 0), PERIOD, PID.gain, family(None, 0.01))
    slowest = loop_math.closed_loop_poles(plant, PID, PERIOD)[0]
    w = -1j * np.log(slowest)  # z = e^{jw}
    loop = loop_math.plant_spectrum(plant, np.array([w])) * loop_math.controller_spectrum(PID, PERIOD, np.array([w]))
    # A pole moved by 1e-12 moves 1 + L by about 1e-10 here.
    assert abs(1.0 + loop[0]) < 1e-7


def test_proportional_loop_around_an_integrator_by_hand() -> None:
    plant, pid = lag(1.0, 0.2), Pid(gain=1.5)
    # Pole 1 − 0.3, without the controller's unused integral; |S| is largest at w = π: 2 / (2 − 0.3).
    assert loop_math.closed_loop_time_constant(plant, pid, 10.0) == pytest.approx(-10.0 / np.log(0.7), rel=1e-12)
    assert loop_math.peak_sensitivity(plant, pid, 10.0) == pytest.approx(2.0 / 1.7, rel=1e-12)


def test_an_unstable_loop_has_no_time_constant() -> None:
    assert loop_math.closed_loop_time_constant(lag(1.0, 0.2), Pid(gain=15.0), 10.0) == np.inf
    assert loop_math.closed_loop_time_constant(lag(0.9, 0.2), Pid(gain=-15.0), 10.0) == np.inf
