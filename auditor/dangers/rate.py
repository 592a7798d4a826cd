"""The replayed actuator moves as fast as it can where the recorded one does not.

After a silence one update asks for a move that the recorded loop made in many small ones. A sample is in danger
under a likely plant when the replayed actuator moves by its slew limit times the base period, and the record does
not, to the step with which it is stored, within one closed-loop time constant before or after. It needs a slew
limit. It is at most "watch" unless the process also comes within one band of its limits at such a sample under at
least half of the likely plants. Evidence: the slew limit and the record's fastest move in the interval.
"""

from __future__ import annotations

import math

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.dangers.base import NULL, Case, Evidence, Stretch, near_limits
from auditor.dangers.interval import widened
from auditor.text import quantity

CAUSE = "rate"
MEANING = "actuator at its slew limit"


def find(case: Case) -> dict[str, BoolArray]:
    """Mark moves at the slew limit."""
    step = _max_rate(case) * case.period
    if not math.isfinite(step) or step <= 0:
        return {}
    # Steps smaller than the log's resolution cannot be seen in the record: any recorded move then counts as fast.
    told = max(step - (case.record.u_quantum or 0.0), 0.0) or np.nextafter(0.0, 1.0)
    recorded = widened(_moves(case.record.u) >= told * (1 - NULL), math.ceil(case.tau_cl))
    return {"slewing": case.only_counted((_moves(case.u) >= step * (1 - NULL)) & ~recorded[:, None])}


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Only where the process also comes near its limits."""
    return near_limits(case, stretch)


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell the slew limit and the record's fastest move."""
    max_rate = _max_rate(case)
    before = max(stretch.start - 1, 0)
    recorded = float(np.nanmax(_moves(case.record.u[before : stretch.stop]))) / case.period
    unit = f"{case.actuator_unit}/s"
    detail = (
        f"{case.actuator_name} moving at its limit of {quantity(max_rate, unit, 3)} {stretch.lasting()}; "
        f"the record moved at most at {quantity(recorded, unit)}"
    )
    return Evidence(detail, {"max_rate": max_rate, "record_rate": recorded})


def _max_rate(case: Case) -> float:
    """Slew limit [actuator unit / s], infinite when there is none."""
    return min(case.model.controller.max_rate, case.record.max_rate)


def _moves(u: FloatArray) -> FloatArray:
    """Size of the move since the sample before, shape of `u`; zero at the first sample, NaN next to a hole."""
    moves = np.zeros_like(u)
    with np.errstate(invalid="ignore"):  # a lane that ran away has no number to move by
        np.abs(np.diff(u, axis=0), out=moves[1:])
    return moves
