"""The whole record: what was measured, what would have been, and where the updates fall."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from auditor.arrays import FloatArray
from auditor.logs.record import Record
from auditor.replay import Series
from auditor.report.content import Content
from auditor.report.figures import style
from auditor.report.figures.time_axis import clock_axis, days, draw_envelope
from auditor.report.phrases import clean

_BARS = 180


def compose(content: Content) -> Figure | None:
    """Draw the picture, or return None for an empty record; without a replay the record stands alone."""
    record = content.audit.record
    if len(record) < 2:
        return None
    series = content.replay.series if content.replay else None
    figure = style.new_figure(3.7 if series else 2.6)
    rows = figure.subplots(2, 1, sharex=True, height_ratios=(3, 1)) if series else [figure.subplots()]
    draw_measurement(rows[0], content, series)
    if series:
        draw_rate(rows[1], content, series)
    clock_axis(rows[-1], record)
    return figure


def draw_measurement(axes: Axes, content: Content, series: Series | None) -> Axes:
    """Draw measurement, setpoint, limits and band over the whole record, by their extremes."""
    record = content.audit.record
    draw_bounds(axes, content)
    draw_envelope(axes, record, record.y, color=style.RECORD, zorder=2, alpha=0.9)
    if series is not None:
        draw_envelope(axes, record, series.y, color=style.REPLAY, zorder=3, alpha=0.55)
    axes.plot(*_thinned(record, record.r), color=style.INK, linewidth=0.8, zorder=4)
    mind_the_signals(axes, content, (record.r, record.y) if series is None else (record.r, record.y, series.y))
    axes.set_ylabel(style.with_unit("measurement", clean(content.audit.loop.signals.measurement.unit)))
    words = [("recorded", style.RECORD), ("setpoint", style.INK)]
    if series is not None:
        words.insert(1, ("replayed", style.REPLAY))
    return heading(axes, words)


def draw_bounds(axes: Axes, content: Content) -> Axes:
    """Draw the band around the setpoint and those limits that come near the signals."""
    record, limits = content.audit.record, content.audit.loop.limits
    if limits.band is not None:
        at, setpoint = _thinned(record, record.r)
        ends = setpoint - limits.band, setpoint + limits.band
        axes.fill_between(at, *ends, color=style.ALLOWED, linewidth=0, zorder=0)
    for name, level in (("low limit", limits.low), ("high limit", limits.high)):
        if level is not None:
            axes.axhline(level, color=style.DANGER, linewidth=0.9, linestyle=(0, (6, 3)), zorder=1)
            axes.annotate(
                name,
                (1.0, level),
                xycoords=("axes fraction", "data"),
                xytext=(-2, 2),
                textcoords="offset points",
                ha="right",
                fontsize=7.5,
                color=style.DANGER,
                annotation_clip=True,
            ).set_in_layout(False)
    return axes


def mind_the_signals(axes: Axes, content: Content, drawn: Sequence[FloatArray]) -> Axes:
    """Scale to the signals; a limit far away would flatten them."""
    values = np.concatenate(drawn)
    values = values[np.isfinite(values)]
    if not len(values):
        return axes
    low, high = float(values.min()), float(values.max())
    reach = (high - low) or content.audit.loop.limits.band or 1.0
    near = [x for x in (content.audit.loop.limits.low, content.audit.loop.limits.high) if x is not None]
    near = [x for x in near if low - reach < x < high + reach]
    low, high = min([low, *near]), max([high, *near])
    axes.set_ylim(low - 0.08 * (high - low or reach), high + 0.08 * (high - low or reach))
    return axes


def draw_rate(axes: Axes, content: Content, series: Series) -> Axes:
    """Draw how many updates per hour the replayed rule used, along the record."""
    record = content.audit.record
    size = max(1, -(-len(record) // _BARS))
    starts = np.arange(0, len(record), size)
    inside = np.add.reduceat(record.in_span.astype(float), starts) * record.period / 3600.0
    updates = np.add.reduceat((series.updated & record.in_span).astype(float), starts)
    rate = np.divide(updates, inside, out=np.full(len(starts), np.nan), where=inside > 0)
    edges = days(record, np.append(starts, len(record)))
    axes.stairs(np.nan_to_num(rate), edges, fill=True, color=style.REPLAY, alpha=0.75)
    axes.axhline(3600.0 / record.period, color=style.RECORD, linewidth=0.9)
    axes.set_ylim(0, 3600.0 / record.period * 1.1)
    axes.set_ylabel("updates\nper hour")
    return heading(axes, [("present clock", style.SOFT), ("replayed", style.REPLAY)])


def heading(axes: Axes, words: list[tuple[str, str]]) -> Axes:
    """Name the lines above the axes, each in its own colour."""
    x = 0.0
    for text, color in words:
        mark = axes.annotate(
            text,
            (0, 1),
            xycoords="axes fraction",
            xytext=(x, 4),
            textcoords="offset points",
            fontsize=8,
            color=style.SOFT if color == style.RECORD else color,
            weight="bold",
        )
        mark.set_in_layout(text == words[0][0])
        x += 5.4 * len(text) + 9.0
    return axes


def _thinned(record: Record, values: FloatArray, points: int = 1500) -> tuple[FloatArray, FloatArray]:
    """Samples at which `values` change, or evenly taken ones when it changes too often to tell."""
    moved = np.flatnonzero(np.r_[True, values[1:] != values[:-1], True])
    both = np.unique(np.concatenate((moved[:-1], moved[1:] - 1)))
    chosen = both if len(both) <= points else np.unique(np.linspace(0, len(values) - 1, points).astype(np.int64))
    return days(record, chosen), values[chosen]
