"""Time along a picture: the log's own clock, and long series drawn by their extremes."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import numpy as np
from matplotlib.axes import Axes

from auditor.arrays import FloatArray, IntArray
from auditor.logs.record import Record
from auditor.report.times import LocalClock, local_clock

_NS_PER_DAY = 86_400e9
_MOST_TICKS = 8
_COLUMNS = 900
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_MINUTE, _HOUR, _DAY = 60.0, 3600.0, 86_400.0
_STEPS = (
    *(1e-3, 2e-3, 5e-3, 1e-2, 2e-2, 5e-2, 0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 30.0),
    *(n * _MINUTE for n in (1, 2, 5, 10, 15, 30)),
    *(n * _HOUR for n in (1, 2, 3, 6, 12)),
    *(n * _DAY for n in (1, 2, 7, 14)),
)
_MONTHS = (1, 2, 3, 6, 12, 24, 60, 120)


def days(record: Record, samples: int | IntArray) -> FloatArray:
    """Times of samples as matplotlib counts them: days since 1970 UTC."""
    return np.asarray(record.time_ns(samples) / _NS_PER_DAY)


def clock_axis(axes: Axes, record: Record, start: int = 0, stop: int | None = None) -> Axes:
    """Show samples start…stop−1 along x on the log's own clock, with even steps of its wall time."""
    clock = local_clock(record.zone, record.period)
    last = (len(record) if stop is None else stop) - 1
    first, last = int(record.time_ns(start)), int(record.time_ns(last))
    ticks = ticks_between(clock, first, last)
    axes.set_xlim(first / _NS_PER_DAY, last / _NS_PER_DAY)
    axes.set_xticks([at for at, _ in ticks], [text for _, text in ticks])
    axes.set_xlabel(_when(clock, first, last), loc="right", fontsize=7.5)
    return axes


def ticks_between(clock: LocalClock, first: int, last: int) -> list[tuple[float, str]]:
    """Places [days since 1970 UTC] and texts of at most eight ticks between two times [ns since 1970 UTC]."""
    begin, end = _wall(clock, first), _wall(clock, last)
    reach = max((end - begin).total_seconds(), 1e-6)
    step = next((s for s in _STEPS if reach / s <= _MOST_TICKS), None)
    if step is None:
        months = next((m for m in _MONTHS if reach / (m * 30.4 * _DAY) <= _MOST_TICKS), _MONTHS[-1])
        walls, form = _monthly(begin, end, months), "%b %Y"
    else:
        walls, form = _even(begin, end, step), _form(step)
    ticks = [(_utc_days(clock, wall), _tick_text(wall, form)) for wall in walls]
    return [(at, text) for at, text in ticks if first / _NS_PER_DAY <= at <= last / _NS_PER_DAY]


def _wall(clock: LocalClock, ns: int) -> datetime:
    return (_EPOCH + timedelta(microseconds=ns // 1000)).astimezone(clock.zone).replace(tzinfo=None)


def _utc_days(clock: LocalClock, wall: datetime) -> float:
    return (wall.replace(tzinfo=clock.zone).astimezone(UTC) - _EPOCH) / timedelta(days=1)


def _even(begin: datetime, end: datetime, step: float) -> Iterator[datetime]:
    """Multiples of `step` [s] counted from the first midnight."""
    midnight = begin.replace(hour=0, minute=0, second=0, microsecond=0)
    count = int((begin - midnight).total_seconds() // step)
    while (wall := midnight + timedelta(seconds=count * step)) <= end:
        yield wall
        count += 1


def _monthly(begin: datetime, end: datetime, months: int) -> Iterator[datetime]:
    count = (begin.year * 12 + begin.month - 1) // months * months
    while (wall := datetime(count // 12, count % 12 + 1, 1)) <= end:
        yield wall
        count += months


def _form(step: float) -> str:
    if step >= _DAY:
        return "%d %b"
    if step >= _MINUTE:
        return "%H:%M"
    return "%H:%M:%S" if step >= 1.0 else "%H:%M:%S.%f"


def _tick_text(wall: datetime, form: str) -> str:
    midnight = wall.hour == wall.minute == wall.second == wall.microsecond == 0
    text = wall.strftime("%d %b" if midnight and form.startswith("%H") else form)
    return (text[:-3] if form.endswith("%f") and "." in text else text).removeprefix("0")


def _when(clock: LocalClock, first: int, last: int) -> str:
    """The days a picture covers, and whose clock its ticks follow."""
    begin, end = (_wall(clock, ns).strftime("%d %b %Y").removeprefix("0") for ns in (first, last))
    return f"{begin}, {clock.name}" if begin == end else f"{begin} to {end}, {clock.name}"


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Envelope:
    """A long series by the extremes of equal stretches.

    Attributes
    ----------
    at : ndarray, shape (columns,)
        Middle of each stretch [days since 1970 UTC].
    low, high : ndarray, shape (columns,)
        Extremes, NaN where nothing was recorded.
    """

    at: FloatArray
    low: FloatArray
    high: FloatArray


def envelope(record: Record, values: FloatArray, columns: int = _COLUMNS) -> Envelope:
    """Take the extremes of `values`, shape (N,), over at most `columns` equal stretches."""
    size = max(1, -(-len(values) // columns))
    padded = np.full(-(-len(values) // size) * size, np.nan)
    padded[: len(values)] = values
    blocks = padded.reshape(-1, size)
    empty = np.isnan(blocks).all(axis=1)
    low = np.where(np.isnan(blocks), np.inf, blocks).min(axis=1)
    high = np.where(np.isnan(blocks), -np.inf, blocks).max(axis=1)
    low[empty] = high[empty] = np.nan
    middle = np.minimum(np.arange(len(blocks)) * size + size // 2, max(len(values) - 1, 0))
    return Envelope(at=days(record, middle), low=low, high=high)


def draw_envelope(axes: Axes, record: Record, values: FloatArray, *, color: str, zorder: float, alpha: float) -> Axes:
    """Draw a long series as the area between its extremes; a stretch of one value shows as a line."""
    drawn = envelope(record, values)
    axes.fill_between(drawn.at, drawn.low, drawn.high, color=color, alpha=alpha, linewidth=0.7, zorder=zorder)
    return axes
