"""From a point to a sampled plant: against scipy's sampled systems and a simulation in small steps."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import linalg, signal

from auditor.errors import CannotAnswerError
from auditor.identify.family import INTEGRATOR_POLE, LONGEST_DELAY, family, to_plant
from auditor.kernels import points
from auditor.kernels.zero_order_hold import difference_equation, exponential, oscillator
from tests.identify.spectral_cases import random_point

KINDS = family(None, 0.01)
PERIOD = 5.0


def continuous(x, m: int):
    """Numerator and denominator of the plant without delay; factors multiplied out here, not taken from the code."""
    kv, p, T = np.exp(x[0]), np.exp(x[1]), np.exp(x[2])
    if m == points.OSCILLATOR:
        return [kv / T], [1.0, 2.0 * p / T, 1.0 / T**2]
    z = np.sign(x[7]) * max(abs(x[7]) - 3.0, 0.0) if m else 0.0
    under = np.array([1.0, p])
    for _ in range(m):
        under = np.convolve(under, [T / m, 1.0])
    return ([kv * z, kv] if z else [kv]), under


def impulse(plant, n: int) -> np.ndarray:
    x, y = np.zeros(plant.order), np.zeros(n)
    for k in range(n):
        y[k] = plant.C @ x
        x = plant.A @ x + plant.B0 * (k == plant.delay) + plant.B1 * (k == plant.delay + 1)
    return y


@pytest.mark.parametrize("m", range(points.STRUCTURES))
def test_response_to_one_held_sample_is_the_continuous_one(m: int) -> None:
    x = random_point(np.random.default_rng(10 + m), m)
    plant = to_plant(x, (m, 0), PERIOD, 1.0, KINDS)
    samples = np.arange(60.0)
    fine = np.concatenate([[0.0], np.arange(1, 60.0)])
    step = signal.lti(*continuous(x, m)).step(T=np.linspace(0.0, 60.0, 60_001))[1]
    at = lambda t: np.interp(t, np.linspace(0.0, 60.0, 60_001), step, left=0.0)  # noqa: E731
    expected = at(fine - x[points.DELAY]) - at(samples - 1.0 - x[points.DELAY])
    # Linear interpolation on a grid of a thousandth of a sample.
    np.testing.assert_allclose(impulse(plant, 60), expected, atol=2e-6 * np.abs(step).max())


@pytest.mark.parametrize("m", range(points.STRUCTURES))
def test_difference_equation_and_state_space_are_the_same_plant(m: int) -> None:
    x = random_point(np.random.default_rng(20 + m), m)
    d, a, b, load = difference_equation(x, m)
    plant = to_plant(x, (m, 0), PERIOD, 1.0, KINDS)
    pulse = np.zeros(80)
    pulse[0] = 1.0
    response = np.concatenate([np.zeros(d + 1), signal.lfilter(b, a, pulse)])[:80]
    # Both exact; what differs is rounding, seen against the largest sample.
    np.testing.assert_allclose(response, impulse(plant, 80), atol=1e-12 * np.abs(response).max())
    undelayed = x.copy()
    undelayed[points.DELAY] = 0.0
    at_once = to_plant(undelayed, (m, 0), PERIOD, 1.0, KINDS)
    np.testing.assert_allclose(
        np.concatenate([[0.0], signal.lfilter(load, a, pulse)])[:80],
        impulse(at_once, 80),
        atol=1e-12 * np.abs(response).max(),
    )


def test_without_delay_it_is_what_scipy_samples() -> None:
    x = random_point(np.random.default_rng(3), 3)
    x[points.DELAY] = 2.0
    plant = to_plant(x, (3, 0), PERIOD, 1.0, KINDS)
    assert plant.delay == 2
    assert np.all(plant.B1 == 0.0)
    sampled = signal.cont2discrete(signal.tf2ss(*continuous(x, 3)), 1.0)[:4]
    expected = np.concatenate([np.zeros(2), signal.dimpulse((*sampled, 1.0), n=50)[1][0][:, 0]])[:50]
    # tf2ss builds a companion matrix, whose exponential loses some digits.
    np.testing.assert_allclose(impulse(plant, 50), expected, atol=1e-9 * np.abs(expected).max())


@pytest.mark.parametrize("t", [0.0, 0.01, 0.4, 1.0])
def test_exponential_is_scipys(t: float) -> None:
    rng = np.random.default_rng(1)
    lower = np.tril(rng.normal(size=(6, 6)))
    # Taylor's remainder at norm 1/2 is 2e-14; squaring multiplies it by the norm of the result.
    np.testing.assert_allclose(exponential(lower, t, True), linalg.expm(lower * t), atol=1e-11)
    M, _ = oscillator(random_point(rng, points.OSCILLATOR))
    np.testing.assert_allclose(exponential(M, t, False), linalg.expm(M * t), atol=1e-11)


def test_plants_numbers_are_in_the_logs_units() -> None:
    x = np.array([np.log(0.02), -np.log(40.0), np.log(12.0), 4.25, np.log(0.03), np.log(1e-4), np.log(5.0), -9.0])
    plant = to_plant(x, (3, 4), PERIOD, -2.0, KINDS, log_posterior=7.5)
    assert plant.structure == "lags"
    assert plant.order == 4
    assert plant.gain == pytest.approx(0.02 * 40.0 / -2.0)
    assert plant.gain_per_s is None
    assert plant.delay == 4
    assert plant.delay_s == pytest.approx(4.25 * PERIOD)
    assert plant.time_constants_s == pytest.approx((200.0, 20.0, 20.0, 20.0))
    assert plant.zero_s == pytest.approx(-6.0 * PERIOD)
    assert plant.load.entry == "between the short lags"
    assert (plant.load.phi, plant.load.walk, plant.load.noise) == pytest.approx((0.97, 1e-4, 5.0))
    assert plant.log_posterior == 7.5
    static = plant.C @ np.linalg.solve(np.eye(4) - plant.A, plant.B0 + plant.B1)
    assert static == pytest.approx(plant.gain, rel=1e-9)
    assert plant.parameters == (*x, 3.0, 4.0)


def test_oscillator_keeps_its_static_gain_and_damping() -> None:
    x = np.array([np.log(0.02), np.log(0.3), np.log(8.0), 1.5, -3.0, -9.0, 0.0, 20.0])
    plant = to_plant(x, (points.OSCILLATOR, 0), PERIOD, 1.0, KINDS)
    assert plant.structure == "oscillatory"
    assert plant.damping == pytest.approx(0.3)
    assert plant.gain == pytest.approx(0.02 * 8.0)
    assert plant.zero_s == 0.0
    static = plant.C @ np.linalg.solve(np.eye(2) - plant.A, plant.B0 + plant.B1)
    assert static == pytest.approx(plant.gain, rel=1e-12)


def test_a_declared_integrator_ramps() -> None:
    kinds = family("integrating", 0.01)
    assert kinds.low[points.LN_POLE] == kinds.high[points.LN_POLE] == np.log(INTEGRATOR_POLE)
    assert not kinds.allowed[points.OSCILLATOR].any()
    x = np.array([np.log(0.02), np.log(INTEGRATOR_POLE), np.log(12.0), 4.25, -3.0, -9.0, 0.0, 0.0])
    plant = to_plant(x, (2, 0), PERIOD, 4.0, kinds)
    assert plant.integrating
    assert plant.gain_per_s == pytest.approx(0.02 / 4.0 / PERIOD)
    assert plant.time_constants_s == pytest.approx((30.0, 30.0))
    # After the lags have died out every sample adds the ramp of one held sample; the pole takes 1e-9 per sample off.
    assert impulse(plant, 400)[-1] == pytest.approx(0.02 / 4.0, rel=1e-6)


@pytest.mark.parametrize(
    ("declared", "pole", "integrating"),
    [(None, 0.0016, True), (None, 0.0017, False), ("self-regulating", 0.0016, False), ("integrating", 1e-9, True)],
)
def test_a_pole_six_times_below_the_lowest_frequency_counts_as_integrating(
    declared: str | None, pole: float, integrating: bool
) -> None:
    x = np.array([0.0, np.log(pole), 1.0, 2.0, -3.0, -9.0, 0.0, 0.0])
    assert to_plant(x, (1, 0), PERIOD, 1.0, family(declared, 0.01)).integrating is integrating


def test_entries_need_the_lags_they_sit_between() -> None:
    allowed = KINDS.allowed
    assert allowed[0].nonzero()[0].tolist() == [points.AT_INPUT, points.AT_OUTPUT, points.AT_BOTH_ENDS]
    assert allowed[1].nonzero()[0].tolist() == [0, 1, 2, 3, 5]
    assert allowed[2:5].all()
    assert allowed[points.OSCILLATOR].nonzero()[0].tolist() == [points.AT_INPUT, points.AT_OUTPUT]


def test_the_longest_delay_is_within_the_bounds() -> None:
    assert KINDS.high[points.DELAY] == LONGEST_DELAY


def test_unstable_plants_are_refused_in_words() -> None:
    with pytest.raises(CannotAnswerError, match="does not identify plants that are unstable"):
        family("unstable", 0.01)
