"""The replay goes where the model was never seen to hold.

The model was identified on the record, so it is known on the range of measurement and actuator that the record's
spans cover. A sample is in danger under a likely plant when the replayed measurement or actuator is outside that
range by more than a quarter of its width. It is "danger" when at least half of the likely plants agree, else
"watch". Evidence: the worst distance outside the range (median over the likely plants under which it appears),
the range, and the margin.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.dangers.base import Case, Evidence, Stretch, worst
from auditor.text import quantity

CAUSE = "outside-model"
MEANING = "outside the range the model was identified on"

MARGIN: Final = 0.25
"""Allowed beyond the range on either side, as a share of its width."""


@dataclass(frozen=True, eq=False, slots=True)
class _Seen:
    """The range of one signal in the record's spans, and the same signal in the replay, shape (N, L)."""

    name: str
    unit: str
    low: float
    high: float
    replayed: FloatArray

    @property
    def margin(self) -> float:
        """Distance allowed beyond the range [unit]."""
        return MARGIN * (self.high - self.low)

    def outside(self, values: FloatArray) -> FloatArray:
        """How far values are outside the range, zero inside [unit]."""
        return np.maximum(np.maximum(self.low - values, values - self.high), 0.0)


def find(case: Case) -> dict[str, BoolArray]:
    """Mark where either signal is outside its range."""
    parts = {}
    for part, seen in _signals(case).items():
        beyond = (seen.replayed < seen.low - seen.margin) | (seen.replayed > seen.high + seen.margin)
        parts[part] = case.only_counted(beyond)
    return parts


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Always: nobody knows what the process does there."""
    return True


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell the signal that is outside under more likely plants, and by how much."""
    part = max(stretch.parts, key=lambda name: float(stretch.parts[name].any(axis=0).mean()))
    seen = _signals(case)[part]
    outside = worst(case, seen.outside(stretch.rows(seen.replayed)), stretch.parts[part])
    detail = (
        f"{seen.name} {quantity(outside, seen.unit)} outside the range seen in the record, "
        f"{quantity(seen.low, seen.unit, 3)} to {quantity(seen.high, seen.unit, 3)}, "
        f"by more than the allowed {quantity(seen.margin, seen.unit)} {stretch.lasting()}"
    )
    return Evidence(detail, {"worst": outside, "seen_low": seen.low, "seen_high": seen.high, "margin": seen.margin})


def _signals(case: Case) -> dict[str, _Seen]:
    """Both signals with the range the record covers."""
    return {
        "measurement": _Seen(case.measurement_name, case.unit, *case.y_range, case.y),
        "actuator": _Seen(case.actuator_name, case.actuator_unit, *case.u_range, case.u),
    }
