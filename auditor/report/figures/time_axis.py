"""Time along a picture: the log's own clock, and long series drawn by their extremes."""

from __future__ import annotations

from dataclasses import dataclass

import matplotlib.dates as mdates
import numpy as np
from matplotlib.axes import Axes

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.record import Record
from auditor.report.times import LocalClock

_NS_PER_DAY = 86_400e9
COLUMNS = 900


def days(record: Record, samples: int | IntArray) -> FloatArray:
    """Times of samples as matplotlib counts them: days since 1970 UTC."""
    return np.asarray(record.time_ns(samples) / _NS_PER_DAY)


def clock_axis(axes: Axes, clock: LocalClock) -> Axes:
    """Write the x axis in the log's own zone."""
    locator = mdates.AutoDateLocator(tz=clock.zone, minticks=4, maxticks=9)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(mdates.ConciseDateFormatter(locator, tz=clock.zone))
    axes.xaxis.get_offset_text().set_color(axes.xaxis.label.get_color())
    return axes


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


def envelope(record: Record, values: FloatArray, columns: int = COLUMNS) -> Envelope:
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
    """Draw a long series as the area between its extremes; short stretches show as the line they are."""
    drawn = envelope(record, values)
    axes.fill_between(drawn.at, drawn.low, drawn.high, color=color, alpha=alpha, linewidth=0.5, zorder=zorder)
    return axes


def inside_spans(record: Record) -> BoolArray:
    """Where the record is used, shape (N,)."""
    return record.in_span
