"""The identified plant in numbers: its parameters over the draws, and how it answers a step.

Textbook letters A, B0, B1, C, d as in `auditor.identify.plant` (method, equation 2.1).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from auditor.arrays import FloatArray, IntArray, read_only
from auditor.identify.plant import Model, Plant

_POINTS = 240


def parameter_interval(model: Model | None, name: str) -> tuple[float, float] | None:
    """5–95 % of one number of the plant over the draws that have it, None when none has."""
    drawn = [getattr(plant, name) for plant in model.plants] if model else []
    return five_to_ninety_five([float(value) for value in drawn if value is not None])


def lag_intervals(model: Model | None) -> list[tuple[float, float]]:
    """5–95 % of every lag over the draws with as many lags as the likeliest, longest first [s]."""
    if model is None:
        return []
    count = len(model.likeliest.time_constants_s)
    alike = [plant.time_constants_s for plant in model.plants if len(plant.time_constants_s) == count]
    found = [five_to_ninety_five([lags[i] for lags in alike]) for i in range(count)]
    return [interval for interval in found if interval is not None]


def five_to_ninety_five(values: list[float]) -> tuple[float, float] | None:
    """5 % and 95 % quantiles, None without values."""
    if not values:
        return None
    low, high = np.quantile(values, (0.05, 0.95))
    return float(low), float(high)


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class StepResponses:
    """Answers of the draws to the actuator moved by one unit.

    Attributes
    ----------
    seconds : ndarray, shape (points,)
        Time since the step [s].
    likeliest : ndarray, shape (points,)
        [measurement unit / actuator unit]
    all : ndarray, shape (draws, points)
    """

    seconds: FloatArray
    likeliest: FloatArray
    all: FloatArray


def step_responses(model: Model) -> StepResponses:
    """Step the actuator by one unit under every draw, from rest, without control."""
    horizon = float(np.median([_horizon(plant, model) for plant in model.plants]))
    stride = max(1, math.ceil(horizon / model.period / _POINTS))
    samples = np.arange(0, stride * _POINTS + 1, stride)
    answers = np.array([_step(plant, samples) for plant in model.plants], dtype=np.float64)
    return StepResponses(
        seconds=read_only(np.asarray(samples * model.period, dtype=np.float64)),
        likeliest=read_only(answers[model.best]),
        all=read_only(answers),
    )


def _horizon(plant: Plant, model: Model) -> float:
    """Time in which the answer shows its shape [s]; an integrator shows its own within the loop's."""
    slow = sum(plant.time_constants_s) + (model.tau_cl_s if plant.integrating else 0.0)
    return plant.delay_s + max(5.0 * slow, 20.0 * model.period)


def _step(plant: Plant, samples: IntArray) -> FloatArray:
    """Answer at `samples`: x[d+1] = B0, then x[k+1] = A x[k] + B0 + B1, taken in equal strides."""
    n, stride = plant.order, int(samples[1])
    one = np.eye(n + 1)
    one[:n, :n], one[:n, n] = plant.A, plant.B0 + plant.B1
    since = samples - plant.delay - 1
    first = int(np.argmax(since >= 0))
    state = np.linalg.matrix_power(one, int(max(since[first], 0))) @ np.append(plant.B0, 1.0)
    many = np.linalg.matrix_power(one, stride)
    answer = np.zeros(len(samples))
    for i in range(first, len(samples) if since[first] >= 0 else 0):
        answer[i] = plant.C @ state[:n]
        state = many @ state
    return answer
