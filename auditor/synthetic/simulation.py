"""A whole loop, simulated from its truth: plant in full, controller, update rule, one plain loop over time.

Written from the method alone (§1, §3, §4; link "sensor", signal "error") and sharing nothing with the replay, so
that a replay can be compared with what would really have happened.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from auditor.arrays import BoolArray, FloatArray, read_only
from auditor.controllers.pid import Pid
from auditor.errors import AuditorError, Problem, raise_all
from auditor.synthetic.device import Memory, begin, execute, moved
from auditor.synthetic.truth import Truth, pushes, sample

Decide: TypeAlias = Callable[[int, float, float, int], bool]
"""``decide(k, e, e_sent, m)``: is sample k sent, m samples after the error e_sent was?"""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Simulation:
    """What a loop did: measurement, actuator, setpoint and where it updated, shape (N,) each.

    `y` is what the sensor reported (noise and resolution included), `u` the position that acted.
    """

    y: FloatArray
    u: FloatArray
    r: FloatArray
    updated: BoolArray

    @property
    def error(self) -> FloatArray:
        """Error r − y, shape (N,) [measurement unit]."""
        return np.asarray(self.r - self.y)


def clock(every: int) -> Decide:
    """Rule of a slowed-down clock: every `every`-th sample."""
    return lambda k, e, e_sent, m: m >= every


def send_on_delta(delta: float, *, shortest: int = 1, longest: int | None = None) -> Decide:
    """Rule ``|e − e_sent| > delta`` [measurement unit], or `longest` samples without an update.

    A request that comes sooner than `shortest` samples after the last update waits until then. It keeps that
    request: make a new one for every simulation.
    """
    asked = False

    def decide(k: int, e: float, e_sent: float, m: int) -> bool:
        nonlocal asked
        asked = (asked and m > 1) or abs(e - e_sent) > delta
        return m >= shortest and (asked or (longest is not None and m >= longest))

    return decide


def send_on_area(area: float, period: float, *, longest: int | None = None) -> Decide:
    """Rule ``h Σ|e − e_sent| > area`` [measurement unit · s] since the last update, or `longest` samples without one.

    It keeps its sum: make a new one for every simulation.
    """
    total = 0.0

    def decide(k: int, e: float, e_sent: float, m: int) -> bool:
        nonlocal total
        total = (0.0 if m == 1 else total) + period * abs(e - e_sent)
        return total > area or (longest is not None and m >= longest)

    return decide


def simulate(
    plant: Truth,
    controller: Pid,
    setpoint: FloatArray,
    load: FloatArray,
    noise: FloatArray,
    *,
    period: float,
    y_step: float | None = None,
    u_step: float | None = None,
    manual: FloatArray | None = None,
    decide: Decide | None = None,
) -> Simulation:
    """Run a loop from rest; the first sample updates.

    Parameters
    ----------
    plant : Truth
    controller : Pid
    setpoint, noise : ndarray, shape (N,), [measurement unit]
    load : ndarray, shape (N,) or (N, s), [load unit]
        Held over the period, or over each of its s equal parts; the plant is solved exactly in between.
    period : float
        Base period h [s].
    y_step, u_step : float or None
        Resolution of the measurement, which the controller sees, and of the actuator's position.
    manual : ndarray, shape (N,), [actuator unit], or None
        Position asked for by hand; NaN where the controller runs. It takes over again as at the start of a span.
    decide : callable or None
        The update rule, asked at every automatic sample but the first; None updates at every sample.

    Returns
    -------
    Simulation

    Raises
    ------
    AuditorError
        When the arrays do not have the same number of samples, or the period is not positive.
    """
    hand = np.full(len(setpoint), np.nan) if manual is None else manual
    _check(len(setpoint), {"load": load, "noise": noise, "manual": hand}, period)
    A, B0, B1, d = sample(plant, period)
    push = pushes(plant, load, period)
    x, inputs = np.zeros(len(plant.C)), np.zeros(len(setpoint) + d + 1)
    y, u, updated = np.empty(len(setpoint)), np.empty(len(setpoint)), np.zeros(len(setpoint), dtype=np.bool_)
    position, memory = plant.rest_u, None
    for k, r in enumerate(setpoint.tolist()):
        y[k] = seen = _rounded(plant.rest_y + float(plant.C @ x) + float(noise[k]), y_step)
        wanted = float(hand[k])
        if math.isnan(wanted):
            memory, updated[k] = _automatic(controller, memory, position, r, seen, k, period, decide)
            wanted = memory.command
        else:
            memory = None
        position = moved(position, wanted, controller.max_rate * period)
        u[k] = acting = _rounded(position, u_step)
        # The input of sample k arrives d samples later (2.1).
        inputs[k + d + 1] = plant.drive(acting)
        x = A @ x + B0 * inputs[k + 1] + B1 * inputs[k] + push[k]
    return Simulation(y=read_only(y), u=read_only(u), r=read_only(setpoint.astype(float)), updated=read_only(updated))


def _automatic(
    pid: Pid, memory: Memory | None, position: float, r: float, y: float, k: int, h: float, decide: Decide | None
) -> tuple[Memory, bool]:
    """One automatic sample: begin, execute or hold; says whether it was an update."""
    if memory is None:
        return begin(pid, position, r, y), True
    m = memory.since + 1
    if decide is None or decide(k, r - y, memory.error, m):
        return execute(pid, memory, r, y, m, h), True
    return memory._replace(since=m), False


def _rounded(value: float, step: float | None) -> float:
    """`value` to the nearest whole number of steps."""
    return value if step is None else round(value / step) * step


def _check(count: int, named: dict[str, FloatArray], period: float) -> None:
    problems = [
        Problem(
            what=f"{name} does not have one value per sample",
            where=name,
            found=f"{len(values)} samples",
            expected=f"{count}, as the setpoint has",
            do="give arrays of the same length",
        )
        for name, values in named.items()
        if len(values) != count
    ]
    if not period > 0:
        problems.append(
            Problem(what="the base period is not positive", where="period", found=f"{period} s", do="give seconds")
        )
    raise_all(AuditorError, problems)
