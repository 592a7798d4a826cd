"""The replayed actuator sits at a limit where the recorded one does not.

A sample is in danger under a likely plant when the replayed actuator is at its lower or upper limit, to half the
step with which it is stored, and the record is not at that limit within one closed-loop time constant before or
after: other update times move the moment of a saturation by that much without changing what happened. It is
"danger" when at least half of the likely plants agree, else "watch". Evidence: the limit, and how close the record
came to it in the interval.
"""

from __future__ import annotations

import math

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.dangers.base import NULL, Case, Evidence, Stretch
from auditor.dangers.interval import widened
from auditor.text import quantity

CAUSE = "saturation"
MEANING = "actuator at a limit"


def find(case: Case) -> dict[str, BoolArray]:
    """Mark both limits."""
    tolerance = _tolerance(case)
    return {name: _only_replayed(case, sign, limit, tolerance) for name, (sign, limit) in _limits(case).items()}


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Always: at a limit the loop is open."""
    return True


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell the limit at which the actuator is longer, and how close the record came."""
    name = max(stretch.parts, key=lambda part: int(stretch.parts[part].sum()))
    sign, limit = _limits(case)[name]
    distance = float(np.min(sign * (limit - stretch.rows(case.record.u))[stretch.parts[name].any(axis=1)]))
    detail = (
        f"{case.actuator_name} at its {name} limit {quantity(limit, case.actuator_unit, 3)} {stretch.lasting()}; "
        f"in that time the record came no closer than {quantity(distance, case.actuator_unit)}"
    )
    return Evidence(detail, {"limit": limit, "distance_to_limit": distance})


def _limits(case: Case) -> dict[str, tuple[float, float]]:
    """Sign and place of the limits the controller keeps, by name; infinite when there are none."""
    controller, record = case.model.controller, case.record
    low = controller.low if math.isfinite(controller.low) else record.low
    high = controller.high if math.isfinite(controller.high) else record.high
    return {name: (sign, at) for name, sign, at in (("lower", -1.0, low), ("upper", 1.0, high)) if math.isfinite(at)}


def _tolerance(case: Case) -> float:
    """Distance from a limit that cannot be told from being there [actuator unit]."""
    low, high = case.u_range
    return max(NULL * (high - low), 0.5 * (case.record.u_quantum or 0.0))


def _only_replayed(case: Case, sign: float, limit: float, tolerance: float) -> BoolArray:
    """Mark where the replay is at the limit and the record is not, nearby in time, shape (N, L)."""

    def at_limit(u: FloatArray) -> BoolArray:
        return np.asarray(sign * (limit - u) <= tolerance)

    recorded = widened(at_limit(case.record.u), math.ceil(case.tau_cl))
    return case.only_counted(at_limit(case.u) & ~recorded[:, None])
