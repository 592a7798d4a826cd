"""Nothing is sent for longer than was stated to be acceptable, or while the error is outside its band.

Two clauses. Overdue: the last update is more than `limits.max_silence` ago, rounded up to whole samples as a guard
rounds it, so that a setting whose own guard is no longer than the limit cannot trip it; the interval is the overdue
part, including the update that ends it. Unanswered: |ẽ| > band without an update for longer than the closed-loop
time constant. Either needs its limit stated. It is at most "watch" unless the process also comes within one band of
its limits meanwhile under at least half of the likely plants. Evidence: the longest silence, or the
longest time out of band without an update (medians over the likely plants under which they appear).
"""

from __future__ import annotations

import math

import numpy as np

from auditor.arrays import BoolArray
from auditor.dangers.base import Case, Evidence, Stretch, near_limits
from auditor.dangers.interval import Runs, find_runs, longer_than, longest_run, paint
from auditor.text import duration, quantity

CAUSE = "silence"
MEANING = "too long without an update"


def find(case: Case) -> dict[str, BoolArray]:
    """Mark overdue samples, and errors that no update answers."""
    limits = case.loop.limits
    parts = {}
    if limits.max_silence is not None:
        parts["overdue"] = _overdue(case, _allowed(case, limits.max_silence))
    if limits.band is not None:
        outside = np.abs(case.error) > limits.band + case.tolerance
        parts["unanswered"] = longer_than(case.only_counted(outside & ~case.updated), case.tau_cl)
    return parts


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Only where the process also comes near its limits."""
    return near_limits(case, stretch)


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell the clauses that fired, each with its longest time."""
    limits = case.loop.limits
    said: list[str] = []
    values: dict[str, float] = {}
    overdue_s = _longest_s(stretch, "overdue")
    if limits.max_silence is not None and overdue_s > 0:
        longest_s = _allowed(case, limits.max_silence) * case.period + overdue_s
        said.append(f"no update for {duration(longest_s)} (acceptable {duration(limits.max_silence)})")
        values.update(longest_silence_s=longest_s, max_silence_s=limits.max_silence)
    unanswered_s = _longest_s(stretch, "unanswered")
    if limits.band is not None and unanswered_s > 0:
        said.append(f"no update for {duration(unanswered_s)} with the error beyond ±{quantity(limits.band, case.unit)}")
        values.update(unanswered_s=unanswered_s, band=limits.band)
    return Evidence(f"{' and '.join(said)}, {stretch.lasting()}", values)


def _allowed(case: Case, max_silence_s: float) -> int:
    """Longest acceptable gap between updates, as a guard on the loop's clock keeps it [samples]."""
    return math.ceil(max_silence_s / case.period - 1e-9)


def _overdue(case: Case, allowed: int) -> BoolArray:
    """Mark samples more than `allowed` after the last update, the ending update included, shape (N, L)."""
    silent = find_runs(~case.updated & case.in_span[:, None])
    # A run starts one sample after its update and the update that ends it stands at `stop`.
    late = Runs(silent.lane, silent.start + allowed, silent.stop + 1).where(silent.length >= allowed)
    return case.only_counted(paint(late, case.updated.shape))


def _longest_s(stretch: Stretch, part: str) -> float:
    """Longest run of one clause, median over the lanes that have one [s]."""
    if part not in stretch.parts:
        return 0.0
    longest = longest_run(stretch.parts[part])
    return float(np.median(longest[longest > 0])) * stretch.period if longest.any() else 0.0
