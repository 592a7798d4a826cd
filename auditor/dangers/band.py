"""The replayed error stays outside the stated band for longer than the loop needs to settle, or ever did.

A likely plant is in danger during an excursion |ẽ| > band that lasts longer than the settling time and longer than
the longest excursion of the recorded error. It needs a stated band. It is at most "watch" unless the process also
comes within one band of its limits during the excursion under at least half of the likely plants. Evidence: the
largest error (median over the likely plants under which it appears), the band, and the record's longest excursion.
"""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray
from auditor.dangers.base import Case, Evidence, Stretch, near_limits, worst
from auditor.dangers.interval import longer_than, longest_run
from auditor.text import duration, quantity

CAUSE = "band"
MEANING = "outside the band for too long"


def find(case: Case) -> dict[str, BoolArray]:
    """Mark excursions longer than allowed."""
    band = case.loop.limits.band
    if band is None:
        return {}
    outside = case.only_counted(np.abs(case.error) > band + case.tolerance)
    return {"outside": longer_than(outside, max(case.settling, _record_longest(case, band)))}


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Only where the process also comes near its limits."""
    return near_limits(case, stretch)


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell the largest error and the record's longest excursion."""
    band = case.loop.limits.band or 0.0
    largest = worst(case, np.abs(stretch.rows(case.error)), stretch.mask)
    longest_s = _record_longest(case, band) * case.period
    detail = (
        f"error up to {quantity(largest, case.unit)}, outside ±{quantity(band, case.unit)} {stretch.lasting()}; "
        f"the record's longest excursion took {duration(longest_s)}"
    )
    return Evidence(detail, {"worst": largest, "band": band, "record_longest_s": longest_s})


def _record_longest(case: Case, band: float) -> int:
    """Longest excursion of the recorded error [samples]."""
    outside = (np.abs(case.record.e) > band) & case.is_counted
    return int(longest_run(outside[:, None])[0])
