"""From replayed lanes to measures, and from measures over draws to an answer with its interval."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import fields

import numpy as np

from auditor.arrays import FloatArray
from auditor.controllers.pid import Pid
from auditor.kernels import measures as M
from auditor.logs.record import Record, Span
from auditor.loop import Limits
from auditor.replay.lanes import TIE
from auditor.replay.types import Measures

ROUNDING = 0.002
"""Half-width added to every interval for rounding, as a share of the answer (method, §5.3)."""

STRETCH = 0.25
"""Share of the 5–95 % width added on each side, at most `STRETCH_LIMIT` of the answer."""

STRETCH_LIMIT = 0.05


def totals(
    y: FloatArray,
    u: FloatArray,
    updated: object,
    record: Record,
    controller: Pid,
    limits: Limits,
    spans: Sequence[Span],
) -> FloatArray:
    """Sum over the samples of `spans`, for every lane; rows as in `auditor.kernels.measures`.

    Parameters
    ----------
    y, u : ndarray, shape (N, lanes); updated : ndarray of uint8, shape (N, lanes)
    """
    starts = np.array([s.start for s in spans], dtype=np.int64)
    stops = np.array([s.stop for s in spans], dtype=np.int64)
    near = 0.5 * record.u_quantum if record.u_quantum else 1e-9 * (_span_of(controller) or 1.0)
    # A value stored exactly on a bound is inside, whatever the last bit of it says.
    tie = TIE * (record.y_quantum or 0.0)
    bounds = np.array(
        [
            np.inf if limits.band is None else limits.band + tie,
            -np.inf if limits.low is None else limits.low - tie,
            np.inf if limits.high is None else limits.high + tie,
            controller.low,
            controller.high,
            near,
        ]
    )
    window = max(1, round(3600.0 / record.period))
    return M.summarise(y, u, updated, record.r, starts, stops, bounds, window)


def _span_of(controller: Pid) -> float:
    width = controller.high - controller.low
    return width if math.isfinite(width) else 0.0


def per_lane(total: FloatArray, record: Record, limits: Limits) -> dict[str, FloatArray]:
    """Measures of every lane by their `audit.json` name, shape (lanes,) each; NaN where not known."""
    h = record.period
    n = total[M.SAMPLES]
    hours = n * h / 3600.0
    with np.errstate(invalid="ignore", divide="ignore"):
        return {
            "updates": total[M.UPDATES],
            "updates_per_hour": total[M.UPDATES] / hours,
            "saved_fraction": 1.0 - total[M.UPDATES] / n,
            "rms_error": np.sqrt(total[M.SQUARES] / n),
            "iae_per_hour": h * total[M.ABSOLUTES] / hours,
            "max_abs_error": total[M.LARGEST],
            "outside_band_s": h * total[M.OUTSIDE_BAND] * (1.0 if limits.band is not None else np.nan),
            "outside_limits_s": h
            * total[M.OUTSIDE_LIMITS]
            * (1.0 if (limits.low is not None or limits.high is not None) else np.nan),
            "min_gap_s": h * total[M.MIN_GAP],
            "median_gap_s": h * total[M.MEDIAN_GAP],
            "max_gap_s": h * total[M.MAX_GAP],
            "peak_updates_per_hour": total[M.PEAK],
            "actuator_travel": total[M.TRAVEL],
            "saturated_s": h * total[M.SATURATED],
            "hours": hours,
        }


def middle(lanes: dict[str, FloatArray], draws: int) -> Measures:
    """Median over the draws of each measure."""
    optional = {f.name for f in fields(Measures) if "None" in str(f.type)}
    values: dict[str, float | None] = {}
    for name, each in lanes.items():
        value = _median(each[:draws])
        values[name] = value if (value is not None or name in optional) else math.inf
    return Measures(**values)  # type: ignore[arg-type]


def _median(values: FloatArray) -> float | None:
    known = values[np.isfinite(values)]
    # A lane that ran away counts as infinitely bad, so the median is unknown when half of them did.
    return float(np.median(known)) if 2 * len(known) > len(values) else None


def interval(values: FloatArray) -> tuple[float, float]:
    """5–95 % of equally weighted draws at (i − ½)/n, widened by the rule of method §5.3.

    Each side is widened by 0.2 % of the answer plus 25 % of the width, the latter at most 5 % of the answer.
    """
    ordered = np.sort(np.where(np.isnan(values), np.inf, values))
    at = (np.arange(len(ordered)) + 0.5) / len(ordered)
    with np.errstate(invalid="ignore"):  # draws that ran away are infinite
        low, median, high = (float(v) for v in np.interp([0.05, 0.5, 0.95], at, ordered))
    size = abs(median)
    if not (math.isfinite(low) and math.isfinite(high)):
        return low, high
    more = ROUNDING * size + min(STRETCH * (high - low), STRETCH_LIMIT * size)
    return low - more, high + more


def log_floor(record: Record) -> dict[str, float]:
    """Further half-width, as a share of the answer, for what the log itself blurs.

    Values from a bench of damaged logs with known truth: y stored in steps of 0.05 / 0.2 / 0.5 deviations of the
    error asks for 0.3 / 0.6 / 2.8 % on counts and 0.1 / 0.8 / 3.0 % on errors; an archive dead-band of
    0.05 / 0.1 deviations for 0.1 / 0.8 % on both.
    """
    spread = record.error_deviation or 1.0
    steps = [0.0, 0.05, 0.2, 0.5]
    coarse = (record.y_quantum or 0.0) / spread
    held = (record.y_deadband or 0.0) / spread
    archive = float(np.interp(held, [0.0, 0.05, 0.1], [0.0, 0.001, 0.008]))
    return {
        "updates": float(np.interp(coarse, steps, [0.0, 0.003, 0.006, 0.028])) + archive,
        "error": float(np.interp(coarse, steps, [0.0, 0.001, 0.008, 0.030])) + archive,
    }


def answer_interval(lanes: FloatArray, draws: int, floor: float) -> tuple[float, float]:
    """Interval of one measure: draws, widening, log floor, and the spread the event loop itself amplifies.

    Parameters
    ----------
    lanes : ndarray, shape (lanes,)
        Draws, the naive answer, and the perturbed replays.
    floor : float
        From `log_floor`.
    """
    low, high = interval(lanes[:draws])
    if not (math.isfinite(low) and math.isfinite(high)):
        return (low if math.isfinite(low) else math.inf), math.inf
    middle_value = float(np.median(lanes[:draws]))
    perturbed = lanes[draws + 1 :]
    chaos = 0.5 * float(np.ptp(perturbed)) if len(perturbed) and np.isfinite(perturbed).all() else 0.0
    more = floor * abs(middle_value) + chaos
    return max(0.0, low - more), high + more


def baseline(record: Record, controller: Pid, limits: Limits, spans: Sequence[Span]) -> Measures:
    """Measures of the record itself, which updated at every sample."""
    y, u = np.ascontiguousarray(record.y[:, None]), np.ascontiguousarray(record.u[:, None])
    updated = np.ones((len(record), 1), dtype=np.uint8)
    return middle(per_lane(totals(y, u, updated, record, controller, limits, spans), record, limits), 1)
