"""What the world does to an invented loop: steps, ramps, many small users, and slow noise.

Times are shape (N, s): N samples, each cut into s equal parts on which the load is held; every duration is in the
unit of the times.
"""

from __future__ import annotations

import math

import numpy as np

from auditor.arrays import FloatArray


def fine_times(count: int, period: float, parts: int) -> FloatArray:
    """Times since the start, shape (count, parts), in the unit of `period`."""
    return np.asarray(np.arange(count * parts) * (period / parts), dtype=np.float64).reshape(count, parts)


def between(times: FloatArray, begin: float, length: float) -> FloatArray:
    """One from `begin` on for `length`, else zero, shape (N, s)."""
    return ((times >= begin) & (times < begin + length)).astype(float)


def opened(times: FloatArray, begin: float, length: float, ramp: float) -> FloatArray:
    """As `between`, but rising and falling over `ramp`, shape (N, s)."""
    return np.asarray(np.clip((times - begin) / ramp, 0, 1) - np.clip((times - begin - length) / ramp, 0, 1))


def pulses(rng: np.random.Generator, times: FloatArray, *, every: float, length: float) -> FloatArray:
    """What many small users draw together, shape (N, s), each of a size between a half and one and a half.

    They come independently, on average one in `every`, and stay for an exponential time of mean `length`.
    """
    steps, clock = np.zeros(times.size + 1), times.ravel()
    for begin in rng.uniform(0, clock[-1], rng.poisson(clock[-1] / every)):
        size = rng.uniform(0.5, 1.5)
        first, last = np.searchsorted(clock, [begin, begin + rng.exponential(length)])
        steps[first] += size
        steps[last] -= size
    return np.asarray(np.cumsum(steps[:-1]).reshape(times.shape))


def drift(rng: np.random.Generator, times: FloatArray, time_constant: float) -> FloatArray:
    """First-order noise of unit deviation, shape (N, s)."""
    clock = times.ravel()
    keep = math.exp(-(clock[1] - clock[0]) / time_constant)
    values, now = np.empty(clock.size), float(rng.normal())
    for k, shock in enumerate(rng.normal(0, math.sqrt(1 - keep**2), clock.size).tolist()):
        now = keep * now + shock
        values[k] = now
    return values.reshape(times.shape)
