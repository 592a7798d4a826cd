"""Rows put in order of time: strays dropped, equal stamps brought together, overlaps of a clock set back marked."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray

_NO_TIME = np.iinfo(np.int64).min
_FEW = 3
_ENOUGH = 20
_SHARE = 0.01


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Order:
    """How the rows of a log become one value per stamp.

    Attributes
    ----------
    rows : ndarray of int64 or None
        Rows in order of time; None when they are recorded in that order already.
    first : ndarray of int64, shape (M,), or None
        Place of the first row of every stamp after ordering; None when no stamp occurs twice.
    stamps : ndarray of int64, shape (M,)
        The distinct stamps [ns since 1970 UTC], ascending.
    stray : ndarray of int64
        Stamps left out because they lie further from the log than the log is long, or are no time at all.
    repeated, overlapped : ndarray of bool, shape (M,)
        Stamps that occur more than once; stamps where rows of two different true times lie between each other.
    """

    rows: IntArray | None
    first: IntArray | None
    stamps: IntArray
    stray: IntArray
    repeated: BoolArray
    overlapped: BoolArray

    def arrange(self, column: npt.NDArray[Any]) -> npt.NDArray[Any]:
        """Return a column in order of time, shape (rows kept,)."""
        return column if self.rows is None else column[self.rows]

    def merge(self, values: FloatArray) -> tuple[FloatArray, BoolArray]:
        """Bring arranged values to one per stamp; where finite ones disagree the value is NaN and the mask True."""
        if self.first is None:
            return values, np.zeros(len(values), dtype=np.bool_)
        with np.errstate(invalid="ignore"):
            low = np.fmin.reduceat(values, self.first)
            high = np.fmax.reduceat(values, self.first)
            conflict = low < high
        return np.where(conflict, np.nan, low), conflict

    def any_of(self, mask: BoolArray) -> BoolArray:
        """Bring an arranged mask to one per stamp: True where any of the rows is."""
        return mask if self.first is None else np.asarray(np.logical_or.reduceat(mask, self.first))


def put_in_order(time: IntArray, measured: BoolArray) -> Order:
    """Order the rows of a log by time; rows of equal stamp keep their recorded order.

    Parameters
    ----------
    time : ndarray of int64, shape (rows,)
        Stamps in recorded order [ns since 1970 UTC].
    measured : ndarray of bool, shape (rows,)
        True where the row carries a measurement: only these tell whether a clock ran over a stretch twice
        (rows of different tags may well be recorded one tag after the other).
    """
    rows = _ascending(time)
    ordered = time if rows is None else time[rows]
    low, high = _without_strays(ordered)
    if high - low < len(ordered):
        rows = (np.arange(len(time)) if rows is None else rows)[low:high]
    kept = ordered[low:high]
    fresh = np.ones(len(kept), dtype=np.bool_)
    fresh[1:] = kept[1:] != kept[:-1]
    first = None if fresh.all() else np.flatnonzero(fresh)
    stamps = kept if first is None else kept[first]
    return Order(
        rows=rows,
        first=first,
        stamps=stamps,
        stray=np.concatenate((ordered[:low], ordered[high:])),
        repeated=_more_than_one(first, len(kept), len(stamps)),
        overlapped=_overlaps(time if measured.all() else time[measured], stamps),
    )


def _ascending(time: IntArray) -> IntArray | None:
    """Return the stable order of the stamps, None when they ascend already."""
    return None if bool((time[1:] >= time[:-1]).all()) else np.argsort(time, kind="stable")


def _more_than_one(first: IntArray | None, rows: int, stamps: int) -> BoolArray:
    """Return True for the stamps that have more than one row."""
    if first is None:
        return np.zeros(stamps, dtype=np.bool_)
    return np.diff(np.append(first, rows)) > 1


def _without_strays(ordered: IntArray) -> tuple[int, int]:
    """Return the part of the ordered stamps that is the log: a few rows further away than it is long are strays."""
    low, high = int(np.searchsorted(ordered, _NO_TIME, side="right")), len(ordered)
    most = max(_FEW, int(_SHARE * (high - low)))
    while high - low >= _ENOUGH:
        head, tail = _far_end(ordered[low:high], most)
        if head == tail == 0:
            break
        low, high = low + head, high - tail
    return low, high


def _far_end(stamps: IntArray, most: int) -> tuple[int, int]:
    """Count the rows at the head, else at the tail, that a gap longer than the rest of the log sets apart."""
    few = min(most, len(stamps) // 2 - 1)
    if few <= 0:
        return 0, 0
    first, last = np.diff(stamps[: few + 1]), np.diff(stamps[-few - 1 :])
    head, tail = int(np.argmax(first)) + 1, few - int(np.argmax(last))
    if first[head - 1] > stamps[-1] - stamps[head] > 0:
        return head, 0
    if last[few - tail] > stamps[-tail - 1] - stamps[0] > 0:
        return 0, tail
    return 0, 0


def _overlaps(time: IntArray, stamps: IntArray) -> BoolArray:
    """Mark the `stamps` in stretches that a clock set back has covered twice; `time` as recorded.

    Rows that merely arrive late leave no more stamps in the stretch than usual; a repeated stretch holds about
    twice as many, and nobody can tell which of its rows came first. Rows in no order at all tell nothing.
    """
    mark: IntArray = np.zeros(len(stamps) + 1, dtype=np.int64)
    behind = np.flatnonzero(time[1:] < time[:-1])
    if len(behind) == 0 or len(behind) > max(_FEW, _SHARE * len(time)):
        return np.zeros(len(stamps), dtype=np.bool_)
    start, end = time[behind + 1], time[behind]
    own = np.unique(time)
    there = np.searchsorted(own, end, side="right") - np.searchsorted(own, start, side="left")
    extent = end.astype(np.float64) - start.astype(np.float64)
    twice = there > 1.5 * (extent / _usual_spacing(time) + 1) + 1
    np.add.at(mark, np.searchsorted(stamps, start[twice], side="left"), 1)
    np.add.at(mark, np.searchsorted(stamps, end[twice], side="right"), -1)
    return np.asarray(np.cumsum(mark[:-1]) > 0, dtype=np.bool_)


def _usual_spacing(time: IntArray) -> float:
    """Return the median spacing of rows recorded one after the other [ns]."""
    spacing = time[1:] - time[:-1]
    forward = spacing[spacing > 0]
    return float(np.median(forward)) if len(forward) else 1.0
