"""From a local clock to UTC: hours that come twice, hours that never come.

A local time w lies in the stretch between two changes of the clock whose offset o holds there, and is w − o in UTC.
Where the clock went back, two neighbouring stretches hold w; where it went forward, none does.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError, available_timezones

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, IntArray
from auditor.errors import LogError, Problem
from auditor.text import nearest

_SECOND = 1_000_000_000
_DAY = 86_400
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
CHOICES = ("first", "second", "order")


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Placed:
    """Local times put on UTC, each array of shape (n,).

    Attributes
    ----------
    utc : ndarray of int64
        Nanoseconds since 1970 UTC.
    missing : ndarray of bool
        Local times that the clock skipped.
    tangled : ndarray of bool
        Times in a repeated hour whose order does not tell the first pass from the second.
    assumed : ndarray of bool
        Times in a repeated hour of which the log holds one pass only, taken for the one its neighbours join.
    """

    utc: IntArray
    missing: BoolArray
    tangled: BoolArray
    assumed: BoolArray


def find_zone(name: str) -> ZoneInfo:
    """Return the zone with this IANA name.

    Raises
    ------
    LogError
        When there is none.
    """
    try:
        return ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        close = nearest(name, available_timezones())
        do = f'did you mean "{close}"?' if close else 'use a name like "Europe/Amsterdam" or "UTC"'
        what = "No time zone has this name."
        raise LogError(
            Problem(what=what, where="[log] timezone", found=f'"{name}"', expected="an IANA name", do=do)
        ) from None


def to_utc(local: IntArray, zone: ZoneInfo, ambiguous: str = "order") -> Placed:
    """Put local times on UTC.

    Parameters
    ----------
    local : ndarray of int64, shape (n,)
        Nanoseconds since 1970 on the local clock, in recorded order.
    zone : ZoneInfo
    ambiguous : {"first", "second", "order"}
        Which pass of a repeated hour is meant; "order" tells by where the stamps step back.
    """
    starts, offsets = _stretches(local, zone)
    place = np.searchsorted(starts, local, side="right") - 1
    second = local - offsets[place]
    first = local - offsets[np.maximum(place - 1, 0)]
    # Stretch k ends, on its own clock, when stretch k+1 starts in UTC.
    ends = np.append(starts[1:] - offsets[1:] + offsets[:-1], np.iinfo(np.int64).max)
    repeated = (place > 0) & (local < ends[np.maximum(place - 1, 0)])
    missing = local >= ends[place]
    late, tangled, assumed = _which_pass(local, first, second, np.where(repeated, place, 0), ambiguous)
    return Placed(utc=np.where(repeated & ~late, first, second), missing=missing, tangled=tangled, assumed=assumed)


def _stretches(local: IntArray, zone: ZoneInfo) -> tuple[IntArray, IntArray]:
    """Return where each stretch starts on its own clock, and its offset [ns]; the first starts before all times."""
    first = int(local.min()) // _SECOND - 2 * _DAY
    last = int(local.max()) // _SECOND + 2 * _DAY
    starts, offsets = [np.iinfo(np.int64).min], [_offset(zone, first)]
    for day in range(first, last, _DAY):
        if _offset(zone, day + _DAY) != offsets[-1]:
            change = _change(zone, day, day + _DAY)
            offsets.append(_offset(zone, change))
            starts.append((change + offsets[-1]) * _SECOND)
    return np.array(starts, dtype=np.int64), np.array(offsets, dtype=np.int64) * _SECOND


def _change(zone: ZoneInfo, before: int, after: int) -> int:
    """Find the first second with the offset that holds at `after`, by halving."""
    while after - before > 1:
        middle = (before + after) // 2
        if _offset(zone, middle) == _offset(zone, after):
            after = middle
        else:
            before = middle
    return after


def _offset(zone: ZoneInfo, second: int) -> int:
    moment = (_EPOCH + timedelta(seconds=second)).astimezone(zone).utcoffset()
    return int(moment.total_seconds()) if moment is not None else 0


def _which_pass(
    local: IntArray, first: IntArray, second: IntArray, change: IntArray, ambiguous: str
) -> tuple[BoolArray, BoolArray, BoolArray]:
    """Choose a pass for each time; `change` numbers the change of the clock that repeats it, 0 where none does."""
    late = np.full(len(local), ambiguous == "second")
    tangled, assumed = np.zeros(len(local), dtype=np.bool_), np.zeros(len(local), dtype=np.bool_)
    if ambiguous == "order" and change.any():
        step = float(np.median(np.abs(np.diff(local)))) if len(local) > 1 else 0.0
        backwards = bool(local[-1] < local[0])  # newest row first
        for run in _runs(change):
            rows = run[::-1] if backwards else run
            turn = _turn(local[rows])
            if turn is None:
                tangled[rows] = True
            elif turn > 0:
                late[rows[turn:]] = True
            else:
                assumed[rows] = True
                late[rows] = _joins_after(rows, first, second, step, -1 if backwards else 1)
    return late, tangled, assumed


def _runs(change: IntArray) -> list[npt.NDArray[np.intp]]:
    """Split the repeated rows into runs of neighbouring rows of the same change of the clock."""
    rows = np.flatnonzero(change)
    return np.split(rows, np.flatnonzero((np.diff(rows) > 1) | (np.diff(change[rows]) != 0)) + 1)


def _turn(local: IntArray) -> int | None:
    """Position at which the second pass begins; 0 when there is one pass only, None when there is no telling."""
    back = np.flatnonzero(np.diff(local) < 0)
    if len(back) == 1:
        return int(back[0]) + 1
    if len(back) == 0:
        # One stamp per pass: it comes twice.
        return 1 if len(local) == 2 and local[0] == local[1] else 0
    return None


def _joins_after(rows: npt.NDArray[np.intp], first: IntArray, second: IntArray, step: float, way: int) -> bool:
    """Tell whether a single pass joins the rows after it as the second pass, and not those before as the first."""
    before, after = rows[0] - way, rows[-1] + way
    n = len(first)
    joins_before = 0 <= before < n and first[rows[0]] - second[before] <= 2 * step
    joins_after = 0 <= after < n and second[after] - second[rows[-1]] <= 2 * step
    return bool(joins_after and not joins_before)
