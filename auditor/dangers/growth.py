"""The replay drifts away from the record by more than the likely plants agree on.

Two clauses. Apart: the middle nine tenths of the likely plants differ in ỹ by more than three standard deviations
of the recorded error, and by more than the band, for longer than the settling time (breaks shorter than a
closed-loop time constant do not end it), and differ more after the first settling time than ever within it: the
loop does not pull them together. The plants concerned are those more than half of that allowance away from the
record. Diverged: ỹ is a million error deviations from the record or no number any more; marked to the end of the
span. It is "danger" when at least half of the likely plants are concerned, else "watch". Evidence: the distance
from the record (median over the likely plants concerned), the largest difference between them, the allowance.
"""

from __future__ import annotations

import math
from typing import Final

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.dangers.base import Case, Evidence, Stretch, worst
from auditor.dangers.interval import merged
from auditor.identify.thresholds import DIVERGED
from auditor.text import quantity

CAUSE = "growth"
MEANING = "drifting away from what was recorded"

TAIL: Final = 0.05
"""Share of the likely plants left out on either side when their difference is taken."""


def find(case: Case) -> dict[str, BoolArray]:
    """Mark plants that went their own way, and plants that ran away."""
    with np.errstate(invalid="ignore", over="ignore"):
        away = np.abs(case.y - case.record.y[:, None])
    return {"apart": _apart(case, away), "diverged": _diverged(case, away)}


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Always: the answer does not hold there."""
    return True


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell how far the replay is from the record and how far the plants are from each other."""
    deviation = _deviation(case, stretch.rows(case.y), stretch.rows(case.record.y))
    distance = worst(case, np.abs(deviation), stretch.mask)
    spread = float(_spread(deviation[stretch.mask.any(axis=1)]).max())
    values = {"worst": distance, "spread": spread, "allowance": _allowance(case)}
    if stretch.parts["diverged"].any():
        share = float(stretch.parts["diverged"].any(axis=0).mean())
        detail = (
            f"{case.measurement_name} runs away without bound {stretch.lasting()}: the loop would not have been stable"
        )
        return Evidence(detail, {**values, "diverged_share": share})
    allowed = quantity(_allowance(case), case.unit)
    detail = (
        f"{case.measurement_name} up to {quantity(distance, case.unit)} from the record {stretch.lasting()}, which "
        f"differ among themselves by up to {quantity(spread, case.unit)} (allowed {allowed})"
    )
    return Evidence(detail, values)


def _allowance(case: Case) -> float:
    """Largest difference between likely plants that is no drift [measurement unit]."""
    return max(case.loop.limits.band or 0.0, 3.0 * case.scale)


def _deviation(case: Case, y: FloatArray, recorded: FloatArray) -> FloatArray:
    """Replay less record, what is no number or further than `DIVERGED` counting as that far, shape (n, L)."""
    ceiling = DIVERGED * case.scale
    with np.errstate(invalid="ignore", over="ignore"):
        return np.asarray(np.clip(np.nan_to_num(y - recorded[:, None], nan=ceiling, posinf=ceiling), -ceiling, ceiling))


def _spread(deviation: FloatArray) -> FloatArray:
    """Width of the middle nine tenths of the lanes, shape (n,) [measurement unit]."""
    lanes = deviation.shape[1]
    out = math.floor(TAIL * lanes)
    ordered = np.sort(deviation, axis=1)
    return np.asarray(ordered[:, lanes - 1 - out] - ordered[:, out])


def _apart(case: Case, away: FloatArray) -> BoolArray:
    """Mark the first clause, shape (N, L)."""
    allowance = _allowance(case)
    far = case.only_counted(away > 0.5 * allowance)
    # Lanes can only differ by the allowance where one of them is half of it away from the record.
    rows = np.flatnonzero(far.any(axis=1))
    spread = np.zeros(len(away))
    spread[rows] = _spread(_deviation(case, case.y[rows], case.record.y[rows]))
    drifting = np.zeros(len(away), dtype=np.bool_)
    for start, stop in merged(np.flatnonzero(spread > allowance), case.tau_cl):
        drifting[start:stop] = _grows(spread[start:stop], case.settling)
    return far & drifting[:, None]


def _grows(spread: FloatArray, settling: float) -> bool:
    """Return True when the spread is larger after the first settling time than ever within it."""
    first = max(1, math.ceil(settling))
    return len(spread) > first and bool(spread[first:].max() > spread[:first].max())


def _diverged(case: Case, away: FloatArray) -> BoolArray:
    """Mark lanes from where they ran away to the end of the span, shape (N, L)."""
    gone = ~(away <= DIVERGED * case.scale) & case.in_span[:, None]
    if gone.any():
        for span in case.record.spans:
            np.maximum.accumulate(gone[span.start : span.stop], axis=0, out=gone[span.start : span.stop])
    return case.only_counted(gone)
