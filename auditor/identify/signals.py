"""The record as the controller's regressions see it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.identify.limits import at_limit, dead, slewing
from auditor.logs.record import Record


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Signals:
    """The record as the regression sees it; `free` is False at limits, `moving` also while slewing.

    Attributes
    ----------
    e, y, r, u : ndarray, shape (N,)
        `e` with the controller's own dead-band.
    w : ndarray, shape (n_w, N)
    good, free, moving : ndarray of bool, shape (N,)
    age, length : ndarray of int, shape (N,)
        Samples since the span began, −1 outside, and samples of the span.
    """

    e: FloatArray
    y: FloatArray
    r: FloatArray
    u: FloatArray
    w: FloatArray
    good: BoolArray
    free: BoolArray
    moving: BoolArray
    age: IntArray
    length: IntArray


def read_signals(record: Record, deadband: float = 0.0) -> Signals:
    """Prepare a record for regressions."""
    age, length = np.full(len(record), -1, dtype=np.int64), np.zeros(len(record), dtype=np.int64)
    for span in record.spans:
        age[span.start : span.stop] = np.arange(len(span))
        length[span.start : span.stop] = len(span)
    good = record.valid & (age >= 0) & ~dead(record)
    free = good & ~at_limit(record)
    e = np.where(np.abs(record.e) <= deadband, 0.0, record.e) if deadband > 0 else record.e
    e, y, r, u = (np.where(good, x, 0.0) for x in (e, record.y, record.r, record.u))
    w = np.where(good & np.isfinite(record.w), record.w, 0.0)
    moving = free & ~slewing(record)
    return Signals(e=e, y=y, r=r, u=u, w=w, good=good, free=free, moving=moving, age=age, length=length)


def window(signals: Signals, most: int) -> Signals:
    """Return the part of at most `most` samples that tells most: free actuator, and above all setpoint moves."""
    n = len(signals.age)
    if n <= most:
        return signals
    moved = signals.moving & (np.diff(signals.r, prepend=signals.r[0]) != 0)
    told = np.concatenate(([0], np.cumsum(signals.moving + (most // 50) * moved)))
    starts = np.arange(0, n - most + 1, most // 4)
    start = int(starts[np.argmax(told[starts + most] - told[starts])])
    part = slice(start, start + most)
    age = signals.age[part].copy()
    begins = np.flatnonzero(age <= 0)
    age[: begins[0] if len(begins) else most] -= max(0, age[0])
    cut = {name: getattr(signals, name)[part] for name in ("e", "y", "r", "u", "good", "free", "moving", "length")}
    return Signals(**cut, w=signals.w[:, part], age=age)
