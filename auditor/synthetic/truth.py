"""`Truth`: a plant known exactly, in continuous time.

Textbook letters: A, B, C, E of ``dx/dt = A x + B g(u(t − delay)) + E load(t)``, ``y = rest_y + C x``; h the base
period, d whole periods and f a fraction of a period of delay (method, §2).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import scipy.linalg

from auditor.arrays import FloatArray, read_only
from auditor.identify.plant import Load, Plant

_NO_LOAD = Load(entry="input", phi=0.0, walk=0.0, noise=0.0)


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Truth:
    """A plant known exactly, about the point where it rests.

    Attributes
    ----------
    A : ndarray, shape (n, n), [1/s]
    B, C, E : ndarray, shape (n,)
        Entry of the actuator, measurement, entry of the load (not delayed); ``C x`` is in measurement units.
    delay_s : float
        Dead time between actuator and plant [s]; need not be a whole number of periods.
    rest_y, rest_u : float
        Measurement and actuator at rest, with no load [measurement unit, actuator unit].
    characteristic : callable or None
        Static curve from the actuator to the plant's input; None when they are the same.
    """

    A: FloatArray
    B: FloatArray
    C: FloatArray
    E: FloatArray
    delay_s: float = 0.0
    rest_y: float = 0.0
    rest_u: float = 0.0
    characteristic: Callable[[float], float] | None = None

    def resting(self, y: float, u: float, characteristic: Callable[[float], float] | None = None) -> Truth:
        """The same plant resting at measurement `y` and actuator `u`, behind a static curve of the actuator."""
        return replace(self, rest_y=y, rest_u=u, characteristic=characteristic)

    def drive(self, u: float) -> float:
        """Input of the plant, as a deviation from rest, with the actuator at `u`."""
        if self.characteristic is None:
            return u - self.rest_u
        return self.characteristic(u) - self.characteristic(self.rest_u)

    def sampled(self, period: float, load: Load = _NO_LOAD) -> Plant:
        """The plant on the base period `period` [s], exact for a held actuator (method, 2.1), linear about rest."""
        A, B0, B1, delay = sample(self, period)
        slope = (self.drive(self.rest_u + 1e-5) - self.drive(self.rest_u - 1e-5)) / 2e-5
        gain, ramp = _gains(self)
        lags, damping = _lags(self.A)
        return Plant(
            A=read_only(A),
            B0=read_only(B0 * slope),
            B1=read_only(B1 * slope),
            C=read_only(self.C),
            delay=delay,
            structure="lags" if damping is None else "oscillatory",
            delay_s=self.delay_s,
            gain=None if gain is None else gain * slope,
            gain_per_s=None if ramp is None else ramp * slope,
            time_constants_s=lags,
            damping=damping,
            load=load,
        )


def chain(
    stages: Sequence[float],
    *,
    gain: float = 1.0,
    delay_s: float = 0.0,
    load_stage: int = 0,
    load_gain: float | None = None,
) -> Truth:
    """Build a plant of lags one after the other, measured at the end of the last.

    Parameters
    ----------
    stages : sequence of float, shape (n,)
        Time constants [s] in the order the effect passes through; infinity is an integrator.
    gain : float
        Static gain [measurement unit / input unit]; ramp per unit of input [.../s] when a stage is an integrator.
    delay_s : float
        Dead time [s].
    load_stage : int
        Number of the stage at whose input the load enters, 0 for the plant's own input.
    load_gain : float or None
        As `gain`, for the load; None for the same.

    Returns
    -------
    Truth
        Resting at zero; `Truth.resting` moves it elsewhere.
    """
    speeds = [1.0 if math.isinf(stage) else 1.0 / stage for stage in stages]
    A = np.diag([0.0 if math.isinf(stage) else -1.0 / stage for stage in stages]) + np.diag(speeds[1:], -1)
    B, E, C = np.zeros((3, len(stages)))
    B[0] = gain * speeds[0]
    E[load_stage] = (gain if load_gain is None else load_gain) * speeds[load_stage]
    C[-1] = 1.0
    return Truth(A=read_only(A), B=read_only(B), C=read_only(C), E=read_only(E), delay_s=delay_s)


def resonance(*, gain: float, frequency: float, damping: float, delay_s: float = 0.0) -> Truth:
    """Build an underdamped plant, gain w² / (s² + 2 ζ w s + w²), with w = `frequency` [rad/s] and ζ = `damping`."""
    A = np.array([[0.0, 1.0], [-(frequency**2), -2.0 * damping * frequency]])
    B = read_only(np.array([0.0, gain * frequency**2]))
    return Truth(A=read_only(A), B=B, C=read_only(np.array([1.0, 0.0])), E=B, delay_s=delay_s)


def sample(plant: Truth, h: float) -> tuple[FloatArray, FloatArray, FloatArray, int]:
    """A, B0, B1 and d of (2.1): the new input acts over the last (1 − f) h of a period, the one before it first."""
    delay = math.floor(plant.delay_s / h + 1e-9)
    fraction = max(0.0, plant.delay_s / h - delay)
    late, B0 = _held(plant.A, plant.B, (1.0 - fraction) * h)
    early, first = _held(plant.A, plant.B, fraction * h)
    return late @ early, B0, late @ first, delay


def pushes(plant: Truth, load: FloatArray, h: float) -> FloatArray:
    """What the load, held over equal parts of each period, adds to the state by its end, shape (N, n)."""
    parts = load.reshape(len(load), -1)
    step, effect = _held(plant.A, plant.E, h / parts.shape[1])
    effects = [effect]
    for _ in range(parts.shape[1] - 1):
        effects.append(step @ effects[-1])
    return np.asarray(parts @ np.array(effects[::-1]))


def _held(A: FloatArray, b: FloatArray, duration: float) -> tuple[FloatArray, FloatArray]:
    """Transition over `duration` [s], and the effect at its end of an input of one held over it."""
    n = len(b)
    block = np.zeros((n + 1, n + 1))
    block[:n, :n], block[:n, n] = A, b
    whole = np.asarray(scipy.linalg.expm(block * duration))
    return whole[:n, :n], whole[:n, n]


def _gains(plant: Truth) -> tuple[float | None, float | None]:
    """Static gain of a plant that settles, else the ramp per second of its integrator (residue of the pole at 0)."""
    right, left = scipy.linalg.null_space(plant.A), scipy.linalg.null_space(plant.A.T)
    if not right.shape[1]:
        return float(-plant.C @ np.linalg.solve(plant.A, plant.B)), None
    v, w = right[:, 0], left[:, 0]
    return None, float((plant.C @ v) * (w @ plant.B) / (w @ v))


def _lags(A: FloatArray) -> tuple[tuple[float, ...], float | None]:
    """Time constants of the real poles, longest first, and the damping of a complex pair when there is one."""
    # A triangular matrix shows its poles; computed ones of equal lags would come out as a false complex pair.
    poles = np.diag(A) if np.array_equal(A, np.tril(A)) else np.linalg.eigvals(A)
    complex_pair = poles[np.abs(poles.imag) > 1e-9 * np.abs(poles)]
    real = poles[(np.abs(poles.imag) <= 1e-9 * np.abs(poles)) & (poles != 0.0)].real
    damping = float(-complex_pair[0].real / abs(complex_pair[0])) if len(complex_pair) else None
    return tuple(sorted((float(-1.0 / p) for p in real), reverse=True)), damping
