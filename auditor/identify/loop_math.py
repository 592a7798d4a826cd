"""The recorded loop around a plant: its controller's spectrum, its poles, its peak sensitivity.

C(q) with q the backward shift, K, Ti, Td, Tf as in the method (§3); it is the transfer from −y to u, which neither
the setpoint weight nor the choice between error and measurement for the derivative changes. An error dead-band, the
limits and the slew limit are left out: they have no spectrum.
"""

from __future__ import annotations

import numpy as np

from auditor.arrays import ComplexArray, FloatArray
from auditor.controllers.pid import Pid
from auditor.identify.plant import Plant

_PEAK_POINTS = 4000  # resolves a resonance 0.5 % wide, sharper than any loop that people leave running
_LOWEST_FREQUENCY = 1e-4  # [rad / base period]
_INTEGRAL_NOW = {"forward": 0.0, "backward": 1.0, "trapezoid": 0.5}
"""Share of the newest error in a step of the integral (method, equation 3.1)."""


def controller_spectrum(controller: Pid, period: float, w: FloatArray) -> ComplexArray:
    """Return C(e^{jw}) of the recorded controller.

    Parameters
    ----------
    controller : Pid
    period : float
        Base period [s].
    w : ndarray, shape (K,)
        Frequencies, 0 < w ≤ π [rad / base period].

    Returns
    -------
    ndarray of complex, shape (K,), [actuator unit / measurement unit]
    """
    q = np.exp(-1j * w)
    now = _INTEGRAL_NOW[controller.integral]
    C = controller.gain + controller.integral_gain * period * (now + (1.0 - now) * q) / (1.0 - q)
    if controller.derivative_time > 0.0:
        filtered = controller.filter_time + period - controller.filter_time * q
        C = C + controller.gain * controller.derivative_time * (1.0 - q) / filtered
    return np.asarray(C)


def plant_spectrum(plant: Plant, w: FloatArray) -> ComplexArray:
    """Return G(e^{jw}) of a sampled plant, shape (K,) [measurement unit / actuator unit]."""
    z = np.exp(1j * np.asarray(w))
    resolvent = z[:, None, None] * np.eye(plant.order) - plant.A
    inputs = (plant.B0 + plant.B1 / z[:, None])[:, :, None]
    states = np.linalg.solve(resolvent, inputs)[:, :, 0]
    return np.asarray(states @ plant.C / z**plant.delay)


def closed_loop_matrix(plant: Plant, controller: Pid, period: float) -> FloatArray:
    """Return the matrix that carries the recorded loop from one sample to the next, setpoint and load at zero.

    States are the plant's, the inputs on their way u[k−1]…u[k−d−1], then integral, derivative and the last
    measurement of the controller.

    Parameters
    ----------
    plant : Plant
    controller : Pid
    period : float
        Base period [s].

    Returns
    -------
    ndarray, shape (n + d + 4, n + d + 4)
    """
    n, d = plant.order, plant.delay
    size = n + d + 4
    I, D, last = n + d + 1, n + d + 2, n + d + 3
    y = np.zeros(size)
    y[:n] = plant.C
    integral, derivative, u = _control_rows(y, I, D, last, controller, period)
    loop = np.zeros((size, size))
    loop[:n, :n] = plant.A
    entering = np.vstack([u, np.eye(size)[n : n + d + 1]])
    loop[:n] += np.outer(plant.B0, entering[d]) + np.outer(plant.B1, entering[d + 1])
    loop[n : n + d + 1] = entering[: d + 1]
    loop[I], loop[D], loop[last] = integral, derivative, y
    return loop


def _control_rows(
    y: FloatArray,
    I: int,
    D: int,
    last: int,
    controller: Pid,
    period: float,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Integral, derivative and command of this sample as rows over the state before it (3.1–3.3, m = 1)."""
    unit = np.eye(len(y))
    now = _INTEGRAL_NOW[controller.integral]
    integral = -controller.integral_gain * period * (now * y + (1.0 - now) * unit[last])
    if controller.integral_gain != 0.0:
        integral = integral + unit[I]
    derivative = np.zeros(len(y))
    if controller.derivative_time > 0.0:
        Tf, step = controller.filter_time, controller.gain * controller.derivative_time
        derivative = (Tf * unit[D] - step * (y - unit[last])) / (Tf + period)
    return integral, derivative, -controller.gain * y + integral + derivative


def closed_loop_poles(plant: Plant, controller: Pid, period: float) -> ComplexArray:
    """Return the poles of the recorded loop around `plant`, shape (n + d + 4,), largest modulus first.

    Poles at zero stand for delays and for parts the controller does not have; the largest modulus is below one when
    the loop is stable.
    """
    poles = np.linalg.eigvals(closed_loop_matrix(plant, controller, period)).astype(np.complex128)
    return np.asarray(poles[np.argsort(-np.abs(poles), kind="stable")])


def closed_loop_time_constant(plant: Plant, controller: Pid, period: float) -> float:
    """Return tau_cl = −h / ln(largest pole modulus) [s]; infinite when the loop is not stable (method, §1)."""
    slowest = float(np.abs(closed_loop_poles(plant, controller, period)[0]))
    if slowest >= 1.0:
        return np.inf
    return -period / float(np.log(max(slowest, 1e-300)))


def peak_sensitivity(plant: Plant, controller: Pid, period: float) -> float:
    """Return Ms = max |1 / (1 + G C)| over frequency."""
    w = np.geomspace(_LOWEST_FREQUENCY, np.pi, _PEAK_POINTS)
    loop = plant_spectrum(plant, w) * controller_spectrum(controller, period, w)
    return float(np.max(1.0 / np.abs(1.0 + loop)))
