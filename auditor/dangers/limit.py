"""The replayed measurement leaves the stated limits where the recorded one does not.

A sample is in danger under a likely plant when the replay is outside low…high on a side on which the record is
inside, or, with a stated band, further outside on that side than the record by more than the band; differences that
are only rounding do not count. It needs a stated limit. It is "danger" when at least half of the likely plants
agree, else "watch". Evidence: the worst excursion beyond the limit (median over the likely plants under which it
appears), and how far inside the limit the record was at that moment (negative: outside).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.dangers.base import Case, Evidence, Stretch, worst
from auditor.text import quantity

CAUSE = "limit"
MEANING = "outside the process limits"


@dataclass(frozen=True, slots=True)
class _Side:
    """One limit: how to measure the distance beyond it, and what to call it."""

    name: str
    where: str
    limit: float
    sign: float

    def beyond(self, y: FloatArray) -> FloatArray:
        """How far `y` is outside, negative inside [measurement unit]."""
        return self.sign * (y - self.limit)


def find(case: Case) -> dict[str, BoolArray]:
    """Mark where the replay is outside and the record is not, per side."""
    return {side.name: _outside(case, side) for side in _sides(case)}


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Always: the limits are what the process must keep."""
    return True


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell the worst excursion, on the side where it is worse, and where the record was then."""
    y, recorded = stretch.rows(case.y), stretch.rows(case.record.y)
    sides = [side for side in _sides(case) if stretch.parts[side.name].any()]
    beyond = [worst(case, side.beyond(y), stretch.parts[side.name]) for side in sides]
    side = sides[int(np.argmax(beyond))]
    inside = _record_inside(side, y, recorded, stretch.parts[side.name])
    detail = (
        f"{case.measurement_name} {quantity(max(beyond), case.unit)} {side.where} "
        f"{quantity(side.limit, case.unit, 3)} {stretch.lasting()}; "
        f"the record was {quantity(abs(inside), case.unit)} {'inside' if inside >= 0 else 'outside'}"
    )
    return Evidence(detail, {"worst": max(beyond), "limit": side.limit, "distance_to_limit": inside})


def _sides(case: Case) -> list[_Side]:
    """Return the limits that were stated."""
    limits = case.loop.limits
    stated = []
    if limits.low is not None:
        stated.append(_Side("below", "below the lower limit", limits.low, -1.0))
    if limits.high is not None:
        stated.append(_Side("above", "above the upper limit", limits.high, 1.0))
    return stated


def _outside(case: Case, side: _Side) -> BoolArray:
    """Mark one side, shape (N, L)."""
    band = case.loop.limits.band
    recorded = side.beyond(case.record.y)
    further = np.inf if band is None else recorded + band
    allowed = np.where(recorded <= case.tolerance, case.tolerance, further)
    return case.only_counted(side.beyond(case.y) > allowed[:, None])


def _record_inside(side: _Side, y: FloatArray, recorded: FloatArray, mask: BoolArray) -> float:
    """How far inside the record was when the replay was worst, median over the lanes concerned."""
    moment = np.where(mask, side.beyond(y), -np.inf).argmax(axis=0)[mask.any(axis=0)]
    return float(np.median(-side.beyond(recorded[moment])))
