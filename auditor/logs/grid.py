"""The loop's own clock laid through the stamps of a log.

A stamp belongs to the grid instant it lies at most a quarter of a period behind, else to the next one: small jitter
is snapped, everything later counts as "the last value at or before the instant".
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.runs import thinned

SAME_STEP = 0.05
"""Log step and base period closer than this share are the same clock (a drifting or rounded one)."""
_TOLERANCE = 0.25
_ON_CLOCK = 0.1
_CONCENTRATED = 0.8
_MOSTLY = 0.9
_SITTING = 1e-5
_UNSEEN = 0.01
_FEWEST_MOVES = 20


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Grid:
    """Where the instants are and which stamp belongs to which.

    Attributes
    ----------
    start : int
        Instant 0 [ns since 1970 UTC].
    count : int
        Number of instants N.
    period, log_step : float
        Base period and typical spacing of the rows [s]; equal when they differ by less than `SAME_STEP`.
    tolerance : float
        A stamp this much later than an instant [s] still belongs to it.
    regular : bool
        Whether the stamps follow a clock at all.
    unit : float
        Spacing the stamps are compared with [s]: the log step, or the period where they sit on it.
    beats : ndarray of int64, shape (B,)
        Stamps that carry a measurement (all stamps where the measurement is stored on change).
    unevenness : ndarray, shape (B − 1,)
        Distance between neighbouring beats less the nearest multiple of `unit` [unit], −0.5…0.5.
    instant : ndarray of int64, shape (M,)
        Grid instant each stamp belongs to.
    phase_from : str
        "stamps", or "actuator" where a log faster than the loop shows when the controller ran.
    """

    start: int
    count: int
    period: float
    log_step: float
    tolerance: float
    regular: bool
    unit: float
    beats: IntArray
    unevenness: FloatArray
    instant: IntArray
    phase_from: str

    @property
    def window(self) -> int:
        """Samples a stored value lasts: one, or as many as a slower log leaves between its rows."""
        return max(1, int(np.ceil(self.log_step / self.period - SAME_STEP)))

    @property
    def coarse(self) -> bool:
        """True when the log is slower than the loop."""
        return self.log_step > self.period

    @property
    def fine(self) -> bool:
        """True when the log is faster than the loop."""
        return self.log_step < self.period


def typical_spacing(beats: IntArray) -> float:
    """Return the median distance of neighbouring stamps [s]."""
    return float(np.median(thinned(beats[1:]) - thinned(beats[:-1]))) / 1e9


def lay_grid(stamps: IntArray, beats: IntArray, moves: IntArray, period: float, on_change: bool) -> Grid:
    """Lay the grid.

    Parameters
    ----------
    stamps : ndarray of int64, shape (M,)
        Distinct stamps, ascending [ns since 1970 UTC].
    beats : ndarray of int64, shape (B,), B ≥ 2
        Those of them that carry a measurement.
    moves : ndarray of int64
        Stamps at which the actuator has a new value.
    period : float
        Base period [s].
    on_change : bool
        The measurement is stored on change only, so that the spacing of rows tells no log step.
    """
    step = period if on_change else typical_spacing(beats)
    step = period if abs(step / period - 1) < SAME_STEP else step
    unit, unevenness = _unevenness(beats, period, step)
    regular = _usually_on(unevenness)
    tolerance = _TOLERANCE * min(period, step) if regular else 1e-6 * period
    anchor, phase_from = _anchor(beats, moves, period, step)
    anchor = _plain(anchor, beats, min(period, step))
    instant = np.ceil(((stamps - anchor) / 1e9 - tolerance) / period).astype(np.int64)
    first = int(instant[0])
    instant -= first
    return Grid(
        start=anchor + round(first * period * 1e9),
        count=int(instant[-1]) + 1,
        period=period,
        log_step=step,
        tolerance=tolerance,
        regular=regular,
        unit=unit,
        beats=beats,
        unevenness=unevenness,
        instant=instant,
        phase_from=phase_from,
    )


def _unevenness(beats: IntArray, period: float, step: float) -> tuple[float, FloatArray]:
    """Return the spacing the beats keep and how far each is off it, in parts of that spacing."""
    spacing = (beats[1:] - beats[:-1]) / 1e9
    on_period = _off_multiple(spacing, period)
    if step == period or (step > period and _usually_on(on_period)):
        return period, on_period
    return step, _off_multiple(spacing, step)


def _usually_on(unevenness: FloatArray) -> bool:
    """Tell whether most stamps are near a multiple of their spacing."""
    return float(np.median(np.abs(thinned(unevenness)))) < _ON_CLOCK


def _off_multiple(spacing: FloatArray, unit: float) -> FloatArray:
    """Return the distance to the nearest multiple, in units."""
    parts = spacing / unit
    return np.asarray(parts - np.rint(parts))


def _anchor(beats: IntArray, moves: IntArray, period: float, step: float) -> tuple[int, str]:
    """Return a time the grid passes through [ns], and what it was taken from."""
    first = int(beats[0])
    if step >= period:
        return first + _typical_offset(beats, first, period)[0], "stamps"
    if len(moves) >= _FEWEST_MOVES:
        offset, concentration = _typical_offset(moves, first, period)
        if concentration > _CONCENTRATED:
            return first + offset, "actuator"
    return first + _typical_offset(beats, first, step)[0], "stamps"


def _plain(anchor: int, beats: IntArray, unit: float) -> int:
    """Return a rounder time close by, where the stamps scatter around the anchor instead of sitting on it."""
    phase = (thinned(beats) - anchor) / (unit * 1e9)
    if float(np.median(np.abs(phase - np.rint(phase)))) < _SITTING:
        return anchor
    for size in (10**9, 10**8, 10**7, 10**6):
        near = round(anchor / size) * size
        if abs(near - anchor) < _UNSEEN * unit * 1e9:
            return near
    return anchor


def _typical_offset(stamps: IntArray, origin: int, unit: float) -> tuple[int, float]:
    """Return the typical phase of the stamps behind `origin` [ns], and how concentrated they are, 0…1.

    The circular mean finds the neighbourhood, the median around it the value: a minority of late rows must not pull
    the grid off the stamps of all the others.
    """
    phase = (thinned(stamps) - origin) / (unit * 1e9)
    mean = np.mean(np.exp(2j * np.pi * (phase - np.rint(phase))))
    concentration = float(np.abs(mean))
    if concentration < _ON_CLOCK:
        return 0, concentration
    centre = float(np.angle(mean)) / (2 * np.pi)
    beside = phase - centre
    offset = centre + float(np.median(beside - np.rint(beside)))
    return (0 if abs(offset) < 1e-6 else round(offset * unit * 1e9)), concentration


def comes_evenly(instants: IntArray) -> bool:
    """Tell whether nearly all values come as many instants after the one before as the typical one does."""
    steps = thinned(instants[1:]) - thinned(instants[:-1])
    return len(steps) == 0 or float(np.mean(np.abs(steps - np.median(steps)) <= 1)) > _MOSTLY


def last_at(values: FloatArray, grid: Grid) -> FloatArray:
    """Return the last finite value of every instant, shape (N,), NaN where there is none.

    Several stamps of one instant are written in order of time, so that the last one stays.
    """
    there = np.isfinite(values)
    out = np.full(grid.count, np.nan)
    if there.all():
        out[grid.instant] = values
    else:
        out[grid.instant[there]] = values[there]
    return out


def any_at(mask: BoolArray, grid: Grid) -> BoolArray:
    """Return True for the instants that any of the marked stamps belongs to, shape (N,)."""
    out = np.zeros(grid.count, dtype=np.bool_)
    out[grid.instant[mask]] = True
    return out
