"""How far the signals went, over every row of automatic operation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray, read_only
from auditor.logs.findings.sentinel import sentinel_mask


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Extent:
    """The values of the loop in automatic operation.

    Attributes
    ----------
    measurement, actuator : ndarray, shapes (n,) and (m,)
        Their numbers, without the customary ones that stand for "no value".
    error : ndarray, shape (p,)
        Setpoint − measurement; the mean of the measurement where there is no column of setpoints.
    rows : int
        Rows looked at.
    whole : bool
        True when these are all rows of the log.
    automatic_only : bool
        True when rows in another mode were left out.
    """

    measurement: FloatArray
    actuator: FloatArray
    error: FloatArray
    rows: int
    whole: bool
    automatic_only: bool


def extent_of(
    *,
    measurement: FloatArray,
    actuator: FloatArray,
    setpoint: FloatArray | None,
    automatic: FloatArray | None,
    newest_first: bool,
    whole: bool,
) -> Extent:
    """Gather the values in automatic operation; all of them when the log has no mode or no such row.

    Parameters
    ----------
    measurement, actuator : ndarray, shape (rows,)
        NaN where a cell is empty.
    setpoint : ndarray, shape (rows,), or None
        Kept until the next one where a cell is empty.
    automatic : ndarray, shape (rows,), or None
        1 in automatic operation, 0 otherwise, NaN where the cell is empty: kept until the next one as well.
    newest_first, whole : bool
    """
    y, u = _numbers(measurement), _numbers(actuator)
    use = np.ones(len(y), dtype=np.bool_) if automatic is None else _kept(automatic, newest_first) == 1.0
    # A guess of the mode under which nothing would be left says nothing about the signals.
    if not (use & np.isfinite(y)).any() or not (use & np.isfinite(u)).any():
        use[:] = True
    r = np.full(len(y), np.nanmean(y[use])) if setpoint is None else _kept(_numbers(setpoint), newest_first)
    return Extent(
        measurement=_finite(y[use]),
        actuator=_finite(u[use]),
        error=_finite((r - y)[use]),
        rows=len(y),
        whole=whole,
        automatic_only=not bool(use.all()),
    )


def _numbers(values: FloatArray) -> FloatArray:
    return np.where(_no_value(values), np.nan, values)


def _no_value(values: FloatArray) -> BoolArray:
    """Return True for the customary numbers that stand for "no value", as long as others are left."""
    mask = sentinel_mask(values, any_number=False)
    return mask if np.isfinite(values[~mask]).any() else np.zeros(len(values), dtype=np.bool_)


def _finite(values: FloatArray) -> FloatArray:
    return read_only(values[np.isfinite(values)])


def _kept(values: FloatArray, newest_first: bool) -> FloatArray:
    """Keep each value until the next one in time, shape (rows,)."""
    forward = values[::-1] if newest_first else values
    last = np.maximum.accumulate(np.where(np.isfinite(forward), np.arange(len(forward)), -1))
    held = np.where(last >= 0, forward[np.maximum(last, 0)], np.nan)
    return held[::-1] if newest_first else held
