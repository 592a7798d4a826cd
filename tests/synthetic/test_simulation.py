"""Simulated loops against closed forms, another package's closed loop, and rules worked out by hand."""

from __future__ import annotations

import math

import control
import numpy as np
import pytest

from auditor.controllers import Pid
from auditor.errors import AuditorError
from auditor.synthetic import chain, clock, send_on_area, send_on_delta, simulate

# Its gain is nothing: what the sensor reads is the noise alone, so a test can dictate the measurement.
DEAF = chain((1.0,), gain=0.0)
P_ONLY = Pid(gain=1.0)


def load_step(plant, pid, h, seconds):
    """Error after a unit step of the load at the plant's input, without noise."""
    n = round(seconds / h)
    return simulate(plant, pid, np.zeros(n), np.ones(n), np.zeros(n), period=h).error


def dictated(y, decide, pid=P_ONLY):
    y = np.asarray(y, float)
    return simulate(DEAF, pid, np.zeros(len(y)), np.zeros(len(y)), y, period=1.0, decide=decide)


@pytest.mark.parametrize("integral", ["forward", "backward", "trapezoid"])
@pytest.mark.parametrize(
    ("lag", "K", "Ti", "expected"), [(1.0, 0.25, 1.0, 4.0), (1.0, 0.5, 1.0, 2.0), (10.0, 5.0, 8.0, 1.6)]
)
def test_integral_of_the_error_after_a_load_step(integral, lag, K, Ti, expected):
    """IE = Ti/K (value from memory: Åström & Hägglund, PID Controllers, 1995), exact on any clock: the sum of the
    error is what moves the integral to minus the load."""
    plant = chain((lag,), delay_s=1.0)
    e = load_step(plant, Pid(gain=K, integral_time=Ti, integral=integral), 0.1, 40 * lag + 60)
    # What is left of the transient after that time is below 1e-6.
    assert 0.1 * -e.sum() == pytest.approx(expected, rel=1e-5)


def test_integral_of_the_absolute_error_tells_an_overshoot():
    """Lag 1, delay 1, K = 0.5, Ti = 1: IAE = 2.0350 against IE = 2; K = 0.25 does not overshoot, IAE = IE = 4
    (derived: the delay equation integrated by Heun's method on a step of 1e-4)."""
    plant = chain((1.0,), delay_s=1.0)
    for K, expected in ((0.5, 2.0350), (0.25, 4.0)):
        coarse, fine = (
            h * np.abs(load_step(plant, Pid(gain=K, integral_time=1.0, integral="trapezoid"), h, 80.0)).sum()
            for h in (0.02, 0.01)
        )
        # A held actuator is h/2 late, so the error falls with h: extrapolated to a continuous controller.
        assert 2 * fine - coarse == pytest.approx(expected, abs=3e-4)


@pytest.mark.parametrize(("K", "T"), [(5.0, 2.0), (0.5, 3.0)])
def test_load_step_with_the_integral_time_on_the_lag(K, T):
    """y = (e^{−t/T} − e^{−Kt/T})/(K − 1), IAE = T/K, ISE = T/(2K(1 + K)), peak at T ln K/(K − 1) (derived)."""

    def figures(h):
        e = load_step(chain((T,)), Pid(gain=K, integral_time=T, integral="trapezoid"), h, 40 * T)
        return np.array([h * np.abs(e).sum(), h * (e**2).sum(), h * np.argmax(-e)]), -e

    h = 0.01
    coarse, _ = figures(2 * h)
    fine, y = figures(h)
    iae, ise, _ = 2 * fine - coarse
    # What the extrapolation leaves is of the order of (K h / T)².
    assert iae == pytest.approx(T / K, rel=1e-4)
    assert ise == pytest.approx(T / (2 * K * (1 + K)), rel=1e-4)
    # A flat top: the largest sample lies within a few periods of the peak.
    assert fine[2] == pytest.approx(T * math.log(K) / (K - 1), abs=3 * h)
    t = h * np.arange(len(y))
    curve = (np.exp(-t / T) - np.exp(-K * t / T)) / (K - 1)
    # Lateness of h/2 in a signal whose slope is at most 1/T.
    assert np.abs(y - curve).max() < 2 * h * K / T


def test_setpoint_response_agrees_with_another_package():
    plant, K, Ti, h, n = chain((20.0, 6.0), gain=0.8), 1.4, 18.0, 1.0, 200
    r = np.where(np.arange(n) >= 5, 1.0, 0.0)
    mine = simulate(plant, Pid(gain=K, integral_time=Ti, integral="backward"), r, np.zeros(n), np.zeros(n), period=h)
    process = control.c2d(control.ss(plant.A, plant.B[:, None], plant.C[None, :], 0.0), h, "zoh")
    # K (1 + h/Ti · z/(z − 1)).
    pi = control.tf([K * (1 + h / Ti), -K], [1.0, -1.0], h)
    theirs = control.forced_response(control.feedback(control.ss(pi * control.tf(process)), 1), inputs=r).outputs
    # The transfer function route loses some digits to its polynomials.
    np.testing.assert_allclose(mine.y, theirs, atol=1e-8)


def test_a_clock_updates_every_so_many_samples_and_holds_between():
    done = dictated(np.arange(10.0), clock(3))
    assert np.flatnonzero(done.updated).tolist() == [0, 3, 6, 9]
    # Bias 0 and K = 1: the command is −y at the update.
    assert done.u.tolist() == [0, 0, 0, -3, -3, -3, -6, -6, -6, -9]


def test_send_on_delta_by_hand():
    y = [0.0, 1.0, 2.0, 3.1, 4.0, 5.2, 5.0, 2.9]
    done = dictated(y, send_on_delta(2.0))
    # From 0: 2.0 is not more than 2, 3.1 is; from 3.1: 5.2 is; from 5.2: 2.9 is.
    assert np.flatnonzero(done.updated).tolist() == [0, 3, 5, 7]


def test_send_on_delta_is_never_silent_for_longer_than_asked():
    done = dictated(np.zeros(12), send_on_delta(2.0, longest=5))
    assert np.flatnonzero(done.updated).tolist() == [0, 5, 10]


def test_a_request_waits_for_the_shortest_gap():
    y = [0.0, 3.0, 0.0, 0.0, 0.0, 0.0, 3.0]
    done = dictated(y, send_on_delta(2.0, shortest=4))
    # The excursion at 1 is over, but its request is sent at 4; the one at 6 is too soon after.
    assert np.flatnonzero(done.updated).tolist() == [0, 4]


def test_send_on_area_starts_its_sum_again():
    y = [0.0, 1.0, 1.0, 1.0, 1.0, 1.0, 2.0, 2.0, 2.0, 2.0]
    done = dictated(y, send_on_area(2.5, 1.0))
    # 1 + 1 + 1 > 2.5 at 3; from the 1 sent then, the 2s at 6, 7, 8 make the next three.
    assert np.flatnonzero(done.updated).tolist() == [0, 3, 8]


def test_by_hand_and_back_without_a_bump():
    manual = np.full(9, np.nan)
    manual[3:6] = [20.0, 20.0, 30.0]
    y = np.array([0, 0, 1.0, 1.0, 4.0, 4.0, 2.0, 2.0, 3.0])
    pid = Pid(gain=1.0, integral_time=2.0, integral="backward", max_rate=15.0)
    done = simulate(DEAF, pid, np.zeros(9), np.zeros(9), y, period=1.0, manual=manual)
    assert done.updated.tolist() == [True] * 3 + [False] * 3 + [True] * 3
    # At 3 the actuator moves by its 15 at most; at 6 the controller takes over where it stands.
    assert done.u[3:7].tolist() == [-1.5 + 15.0, 20.0, 30.0, 30.0]
    # Then K e + I: I = 30 + 2 at take-over, less 0.5 · 2 at the next sample.
    assert done.u[7] == pytest.approx(-2.0 + 32.0 - 1.0)


def test_limits_and_resolutions_hold():
    rng = np.random.default_rng(5)
    n = 400
    pid = Pid(gain=30.0, integral_time=20.0, low=20.0, high=60.0, max_rate=2.0)
    plant = chain((20.0,), gain=0.05, delay_s=2.3).resting(2.0, 40.0)
    noise, load = rng.normal(0, 0.05, n), 60 * np.sin(np.arange(n) / 30)
    done = simulate(plant, pid, np.full(n, 2.0), load, noise, period=1.0, y_step=0.01, u_step=0.5)
    assert done.u.min() == 20.0
    assert done.u.max() == 60.0
    # Two of rate, and half a step of rounding at either end.
    assert np.abs(np.diff(done.u)).max() <= 2.5
    for values, step in ((done.y, 0.01), (done.u, 0.5)):
        np.testing.assert_allclose(values / step, np.round(values / step), atol=1e-9)


def test_every_mistake_is_told_at_once():
    with pytest.raises(AuditorError) as told:
        simulate(DEAF, P_ONLY, np.zeros(5), np.zeros(4), np.zeros(6), period=0.0, manual=np.zeros(3))
    assert [p.where for p in told.value.problems] == ["load", "noise", "manual", "period"]
