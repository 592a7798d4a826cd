"""Which column is the measurement, which the setpoint, which the actuator: by behaviour first, by name second.

Every assignment of roles is scored by how well a control law explains the actuator (`law`), by how a setpoint behaves
(it moves seldom, and the measurement hovers around it), and, with little weight, by the names. The worse the law
explains the log, the more the names count.
"""

from __future__ import annotations

import functools
import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.draft.law import STRIDES, Moments, at_limit, moments
from auditor.draft.words import names

MOST_SIGNALS = 24
# What a sign of behaviour or of the name is worth beside the share the law explains (0…1).
HOVERS, FAR, CALM, RESTLESS = 0.10, -0.30, 0.10, -0.20
NAME_LEAST, NAME_MORE = 0.08, 0.30


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Roles:
    """The best assignment.

    Attributes
    ----------
    measurement, actuator : int
        Positions among the candidates.
    setpoint : int or None
        None for a constant setpoint that is not in the log.
    explained : float
        Share of the actuator's movement the law explains.
    without_setpoint : float
        The same with the setpoint taken as constant.
    next_best : float
        The largest share under another measurement or another actuator, at most as well scored.
    """

    measurement: int
    actuator: int
    setpoint: int | None
    explained: float
    without_setpoint: float
    next_best: float

    @property
    def clear(self) -> bool:
        """True when the law leaves little unexplained, and every other choice at least three times as much."""
        return self.explained > 0.9 and 1.0 - self.explained < (1.0 - self.next_best) / 3.0


@dataclass(frozen=True, slots=True)
class _Choice:
    u: int
    y: int
    r: int | None
    explained: float
    score: float


def find_roles(headers: Sequence[str], grid: FloatArray, use: BoolArray) -> Roles | None:
    """Return the best assignment of roles, None when fewer than two columns move.

    Parameters
    ----------
    headers : sequence of str, length m
    grid : ndarray, shape (N, m)
        Candidate signals on an even clock.
    use : ndarray of bool, shape (N,)
        False where the loop was not in automatic operation.
    """
    moving = [n for n in range(grid.shape[1]) if _moves(grid[:, n])]
    if len(moving) < 2:
        return None
    setpoints = [n for n in range(grid.shape[1]) if np.isfinite(grid[:, n]).any()]
    table = _law_table(grid, use, moving)
    fits = {
        (u, y, r): _fit(table[u], u, y, r)
        for u, y in itertools.permutations(moving, 2)
        for r in (None, *(n for n in setpoints if n not in (u, y)))
    }
    weight = NAME_LEAST + NAME_MORE * (1.0 - max(fits.values()))
    shapes = _shapes(grid, moving, setpoints)
    choices = [
        _Choice(u, y, r, fit, fit + shapes.get((y, r), 0.0) + weight * _named(headers, u, y, r))
        for (u, y, r), fit in fits.items()
    ]
    best = max(choices, key=lambda choice: choice.score)
    others = [c.explained for c in choices if (c.u, c.y) not in ((best.u, best.y), (best.u, best.r))]
    return Roles(
        measurement=best.y,
        actuator=best.u,
        setpoint=best.r,
        explained=best.explained,
        without_setpoint=fits[(best.u, best.y, None)],
        next_best=max(others, default=0.0),
    )


def _moves(values: FloatArray) -> bool:
    known = values[np.isfinite(values)]
    return bool(len(known) and known.max() > known.min())


def _law_table(grid: FloatArray, use: BoolArray, moving: Sequence[int]) -> Mapping[int, list[Moments]]:
    """Return the moments to judge each actuator candidate by, without the samples at its limits."""
    plain = [moments(grid, use, stride) for stride in STRIDES]
    table = {}
    for u in moving:
        limited = at_limit(grid[:, u])
        table[u] = [moments(grid, use & ~limited, stride) for stride in STRIDES] if limited.any() else plain
    return table


def _fit(table: Sequence[Moments], u: int, y: int, r: int | None) -> float:
    return max(stride.explained(u, y, r) for stride in table)


def _shapes(grid: FloatArray, moving: Sequence[int], setpoints: Sequence[int]) -> dict[tuple[int, int | None], float]:
    restless = [_restlessness(grid[:, n]) for n in range(grid.shape[1])]
    return {
        (y, r): _hovering(grid[:, r] - grid[:, y]) + (CALM if restless[r] < 0.5 * restless[y] else RESTLESS)
        for y in moving
        for r in setpoints
        if r != y
    }


def _restlessness(values: FloatArray) -> float:
    """Share of samples at which a signal changes."""
    steps = np.diff(values)
    steps = steps[np.isfinite(steps)]
    return float(np.mean(steps != 0)) if len(steps) else 0.0


def _hovering(error: FloatArray) -> float:
    """A measurement hovers around its setpoint: the mean error is small against the error's own spread."""
    known = error[np.isfinite(error)]
    if not len(known):
        return FAR
    mean, spread = abs(float(np.mean(known))), float(np.std(known))
    return HOVERS if mean <= 0.5 * spread else FAR if mean > 3.0 * spread else 0.0


def _named(headers: Sequence[str], u: int, y: int, r: int | None) -> float:
    score = name_weight(headers[u], "actuator") + name_weight(headers[y], "measurement")
    return score + (name_weight(headers[r], "setpoint") if r is not None else 0.0)


@functools.cache
def name_weight(header: str, role: str) -> float:
    """Return what a name says about a role: up to 1 for it, below 0 for another one, 0 for nothing."""
    speaks = _speaks(header)
    if "setpoint" in speaks:
        return 1.0 if role == "setpoint" else -0.5
    if role == "measurement" and "actuator" not in speaks:
        return 1.0 if "measurement" in speaks else 0.5 if "quantity" in speaks else -0.5 if "device" in speaks else 0.0
    if role == "actuator" and "measurement" not in speaks:
        return 1.0 if "actuator" in speaks else 0.7 if "device" in speaks and "quantity" not in speaks else 0.0
    return -0.5 if speaks.keys() & {"actuator", "measurement"} else 0.0


def _speaks(header: str) -> dict[str, str]:
    """Return the word that speaks for each role."""
    roles = ("setpoint", "actuator", "device", "measurement", "quantity")
    return {role: word for role in roles if (word := names(header, role)) is not None}


def word_for(header: str, role: str) -> str | None:
    """Return the word in a name that speaks for `role`, None when it says nothing or speaks for another role."""
    if name_weight(header, role) <= 0:
        return None
    found = _speaks(header)
    return found.get(role) or found.get({"measurement": "quantity", "actuator": "device"}.get(role, role))


def strongest(headers: Sequence[str], filled: Sequence[float]) -> list[int]:
    """Return the candidates to look at when there are too many: those whose names say something, then the fullest."""
    order = sorted(range(len(headers)), key=lambda n: (not _speaks(headers[n]), -filled[n], n))
    return sorted(order[:MOST_SIGNALS])
