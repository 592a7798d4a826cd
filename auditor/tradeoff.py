"""Every rule against the best clock that uses no more updates (method, §6)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from auditor.arrays import FloatArray
from auditor.loop import Loop
from auditor.progress import Progress, silent
from auditor.replay.bench import Bench
from auditor.replay.lanes import diverged, replay_lanes
from auditor.replay.measuring import interval, per_lane, totals
from auditor.replay.types import Setting
from auditor.sweep import PARTS, Parts
from auditor.workers import run_each

CAP = 10.0
"""Largest lead over the clock that is told apart, in RMS errors of the rule."""

SPACING = 1.1
"""Ratio of neighbouring divisors where they are not dense; coarser ones overstate the clock near instability."""

PHASES = 8
"""The clock at every n is averaged over up to this many phases: where it starts is chance."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class ClockCurve:
    """The slowed-down clock under every likely plant.

    Attributes
    ----------
    every : tuple of int
        Divisors n, ascending.
    counts, squares : mapping of part to ndarray, shape (divisors, draws)
        Updates and mean square error [unit²], the mean over phases; infinite where the clock ran away.
    """

    every: tuple[int, ...]
    counts: dict[str, FloatArray]
    squares: dict[str, FloatArray]


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """A rule against the best clock with no more updates, on one part of the record.

    `difference90` is the 90 % interval of (rule − clock) in RMS error over the likely plants; None when even the
    slowest clock replayed uses more updates than the rule.
    """

    outcome: str
    clock_rms: float | None
    difference90: tuple[float, float] | None


def divisors_for(fewest: float, samples: int) -> tuple[int, ...]:
    """Divisors dense at first, then about 10 % apart, until the clock uses no more than `fewest` updates."""
    slowest = max(2, int(np.ceil(samples / max(fewest, 1.0))) + 1)
    grid = [1, 2, 3, 4, 5, 6, 7, 8]
    while grid[-1] < slowest:
        grid.append(max(grid[-1] + 1, round(grid[-1] * SPACING)))
    return tuple(grid)


def clock_curve(
    bench: Bench, loop: Loop, parts: Parts, every: Sequence[int], *, link: str = "sensor", between: str = "hold",
    jobs: int = 2, progress: Progress = silent,
) -> ClockCurve:  # fmt: skip
    """Replay the slowed-down clock at every divisor and phase over every likely plant, on one link."""

    def one(n: int) -> dict[str, tuple[FloatArray, FloatArray]]:
        return _mean_over_phases(bench, loop, parts, n, link, between)

    rows = run_each(one, every, jobs, "replaying the slowed-down clock", progress)
    return ClockCurve(
        every=tuple(every),
        counts={p: np.array([row[p][0] for row in rows]) for p in PARTS},
        squares={p: np.array([row[p][1] for row in rows]) for p in PARTS},
    )


def _mean_over_phases(
    bench: Bench, loop: Loop, parts: Parts, n: int, link: str, between: str
) -> dict[str, tuple[FloatArray, FloatArray]]:
    phases = np.unique(np.linspace(1, n, min(n, PHASES)).round().astype(int))
    counts: dict[str, list[FloatArray]] = {p: [] for p in PARTS}
    squares: dict[str, list[FloatArray]] = {p: [] for p in PARTS}
    for phase in phases:
        values = {"every": float(n), "phase": float(phase)}
        lanes = replay_lanes(bench, Setting(rule="periodic", link=link, between=between, values=values))
        unstable = diverged(lanes, bench)[: bench.draws]
        for part in PARTS:
            total = totals(
                lanes.y, lanes.u, lanes.updated, bench.record, bench.controller, loop.limits, getattr(parts, part)
            )
            measured = per_lane(total, bench.record, loop.limits)
            counts[part].append(measured["updates"][: bench.draws])
            squares[part].append(np.where(unstable, np.inf, measured["rms_error"][: bench.draws] ** 2))
    return {p: (np.mean(counts[p], axis=0), np.mean(squares[p], axis=0)) for p in PARTS}


def best_clock(counts: FloatArray, squares: FloatArray, budget: float) -> float:
    """Smallest mean square error of a clock that uses at most `budget` updates, for one likely plant.

    Between neighbouring divisors the mean square is linear in the count (time-sharing); with fixed gains the
    clock's curve is not monotone, so a slower clock may be the best one (lower envelope).

    Parameters
    ----------
    counts, squares : ndarray, shape (divisors,)
        From the fastest clock to the slowest.

    Returns
    -------
    float
        NaN when every clock uses more than `budget`; infinite when those that do not ran away.
    """
    slower = counts <= budget
    if not slower.any():
        return float("nan")
    best = float(np.min(squares[slower]))
    first = int(np.argmax(slower))
    if first > 0 and np.isfinite(squares[first - 1]):
        share = (budget - counts[first]) / (counts[first - 1] - counts[first])
        best = min(best, float((1 - share) * squares[first] + share * squares[first - 1]))
    return best


def compare(curve: ClockCurve, part: str, counts: FloatArray, squares: FloatArray) -> Comparison:
    """Compare one setting with the clock, likely plant by likely plant.

    Parameters
    ----------
    counts, squares : ndarray, shape (draws,)
        The setting's updates and mean square errors on `part`.
    """
    best = np.array(
        [
            best_clock(curve.counts[part][:, d], curve.squares[part][:, d], counts[d])
            for d in range(curve.counts[part].shape[1])
        ]
    )
    if 2 * np.isnan(best).sum() >= len(best):
        return Comparison(outcome="unclear", clock_rms=None, difference90=None)
    clock = float(np.sqrt(np.nanmedian(best)))
    # A clock that ran away loses by as much as anyone can tell; how far it ran says nothing.
    cap = CAP * float(np.median(np.sqrt(squares)))
    with np.errstate(invalid="ignore"):
        difference = np.maximum(np.sqrt(squares) - np.sqrt(best), -cap)
    low, high = interval(np.where(np.isnan(difference), np.inf, difference))
    # The answer's own rounding is relative to the difference; what counts is the error it is a difference of.
    rounding = 0.001 * min(clock, cap)
    low, high = low - rounding, high + rounding
    outcome = "better" if high < 0 else ("worse" if low > 0 else "unclear")
    return Comparison(
        outcome=outcome,
        clock_rms=clock if np.isfinite(clock) else None,
        difference90=(-np.inf if low <= -0.9 * cap else low, high),
    )
