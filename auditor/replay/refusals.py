"""What a log cannot carry: the settings it must not be asked about, each with the number that failed (method, §5.4)."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.replay.bench import Bench
from auditor.replay.types import Setting
from auditor.rules import get_rule
from auditor.text import duration, number

QUANTA = 3.0
"""Below three steps of the measurement even the exact plant is 25–35 % off: thresholds flip with rounding."""

DEADBANDS = 4.0
"""Below four dead-bands of the archive the record lacks the moves that would fire the rule."""

LOG_STEPS = 5.0
"""A log coarser than the loop cannot tell updates closer than five of its own rows."""

WIDEST = 0.5
"""An interval wider than half the answer is no answer."""

GOOD_WIDTH = 0.05


def refusal(
    setting: Setting,
    bench: Bench,
    lanes: Mapping[str, FloatArray],
    intervals: Mapping[str, tuple[float, float]],
    unstable: BoolArray,
) -> str | None:
    """Say why this setting cannot be answered from this log, or None when it can.

    Parameters
    ----------
    lanes : mapping of str to ndarray, shape (lanes,)
        Measures of every lane over the counted samples.
    unstable : ndarray of bool, shape (draws,)
        Draws under which the replayed loop ran away.
    """
    reasons = (
        _runs_away(unstable),
        _under_resolution(setting, bench),
        _finer_than_log(bench, lanes),
        _too_wide(intervals, lanes, bench.draws),
    )
    return next((r for r in reasons if r is not None), None)


def _runs_away(unstable: BoolArray) -> str | None:
    share = float(np.mean(unstable))
    if share < 0.5:
        return None
    return f"the loop would not have been stable under {100 * share:.0f} % of the likely plants"


def _under_resolution(setting: Setting, bench: Bench) -> str | None:
    rule = get_rule(setting.rule)
    threshold = setting.values.get(rule.threshold) if rule.threshold else None
    if threshold is None or setting.link == "actuator" or math.isinf(threshold):
        return None
    for name, size, times in (
        ("steps of the stored measurement", bench.record.y_quantum, QUANTA),
        ("dead-bands of the archive", bench.record.y_deadband, DEADBANDS),
    ):
        if size and threshold < times * size * (1 - 1e-9):
            return (
                f"{rule.threshold} {number(threshold)} is {number(threshold / size, 2)} {name} ({number(size)}); "
                f"below {times:g} the log cannot answer"
            )
    return None


def _finer_than_log(bench: Bench, lanes: Mapping[str, FloatArray]) -> str | None:
    record = bench.record
    if record.log_step <= 1.5 * record.period:
        return None
    gap = 3600.0 / float(np.median(lanes["updates_per_hour"][: bench.draws]) or math.inf)
    if gap >= LOG_STEPS * record.log_step:
        return None
    return (
        f"updates every {duration(gap)} on average, but the log has a row every {duration(record.log_step)}; "
        f"closer than {LOG_STEPS:g} rows it cannot answer"
    )


def relative_width(intervals: Mapping[str, tuple[float, float]], lanes: Mapping[str, FloatArray], draws: int) -> float:
    """Larger relative width of the intervals of updates and RMS error."""
    widths = []
    for name in ("updates", "rms_error"):
        low, high = intervals[name]
        middle = float(np.median(lanes[name][:draws]))
        widths.append((high - low) / abs(middle) if middle and math.isfinite(high) else math.inf)
    return max(widths)


def _too_wide(intervals: Mapping[str, tuple[float, float]], lanes: Mapping[str, FloatArray], draws: int) -> str | None:
    width = relative_width(intervals, lanes, draws)
    if width <= WIDEST:
        return None
    low, high = intervals["updates"]
    return (
        f"the likely plants disagree: 90 % interval of the updates {number(low)}…{number(high)}, of the RMS error "
        f"{number(intervals['rms_error'][0])}…{number(intervals['rms_error'][1])}; wider than {100 * WIDEST:.0f} % of "
        "the answer"
    )


def trust_of_width(lanes: Mapping[str, FloatArray], intervals: Mapping[str, tuple[float, float]], draws: int) -> str:
    """Trust of one answer from the width of its own interval: within 5 % good, within 50 % limited."""
    return "good" if relative_width(intervals, lanes, draws) <= GOOD_WIDTH else "limited"
