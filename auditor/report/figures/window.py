"""The most telling window: every sample, every update, and what the actuator did."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from auditor.dangers.interval import Flag
from auditor.replay import Series
from auditor.report.content import Content
from auditor.report.figures import style
from auditor.report.figures.record import draw_bounds, heading, mind_the_signals
from auditor.report.figures.time_axis import clock_axis, days
from auditor.report.phrases import clean

_FEWEST, _MOST = 120, 900
_TELLING_SHARE = 0.25


@dataclass(frozen=True, slots=True, kw_only=True)
class Window:
    """Samples start…stop−1, and why just these."""

    start: int
    stop: int
    why: str
    flag: Flag | None = None


def telling_window(content: Content) -> Window | None:
    """Choose the window: the most severe flag of the replay, or its largest error when no flag weighs much."""
    replay = content.replay
    if replay is None or replay.series is None or not content.audit.record.in_span.any():
        return None
    # A stretch without data shows nothing about the setting.
    own = [flag for flag in content.audit.flags if flag.replay == content.focus and flag.cause != "blind"]
    worst = min(own, key=lambda f: (f.severity != "danger", -f.values.get("share", 0.0), f.start), default=None)
    if worst is not None and (worst.severity == "danger" or worst.values.get("share", 0.0) >= _TELLING_SHARE):
        why = f"the most severe flag of this setting ({worst.cause}, {worst.severity})"
        return _around(content, worst.start, worst.stop, why, worst)
    error = np.abs(content.audit.record.r - replay.series.y)
    error[np.isnan(error) | ~content.audit.record.in_span] = -1.0
    peak = int(np.argmax(error))
    return _around(content, peak, peak + 1, "the largest error of this setting", None)


def _around(content: Content, start: int, stop: int, why: str, flag: Flag | None) -> Window:
    """Room on both sides: two thirds of the window, or the settling of the loop, within what a page can show."""
    model, length = content.audit.model, len(content.audit.record)
    settling = 0 if model is None else int(2 * model.settling_s / model.period)
    width = int(np.clip(max(3 * (stop - start), settling), _FEWEST, _MOST))
    middle = (start + min(stop, start + width)) // 2
    first = int(np.clip(middle - width // 2, 0, max(0, length - width)))
    return Window(start=first, stop=min(first + width, length), why=why, flag=flag)


def compose(content: Content) -> Figure | None:
    """Draw the picture, or return None when there is no replayed series."""
    window = telling_window(content)
    replay = content.replay
    if window is None or replay is None or replay.series is None:
        return None
    figure = style.new_figure(4.4)
    rows = figure.subplots(3, 1, sharex=True, height_ratios=(5, 0.7, 3))
    draw_measurement(rows[0], content, replay.series, window)
    draw_updates(rows[1], content, replay.series, window)
    draw_actuator(rows[2], content, replay.series, window)
    clock_axis(rows[2], content.audit.record, window.start, window.stop)
    return figure


def draw_measurement(axes: Axes, content: Content, series: Series, window: Window) -> Axes:
    """Draw both measurements with setpoint, band and limits."""
    record = content.audit.record
    k = np.arange(window.start, window.stop)
    at, setpoint, recorded, replayed = days(record, k), record.r[k], record.y[k], series.y[k]
    draw_bounds(axes, content)
    if window.flag is not None:
        edges = days(record, np.array((window.flag.start, window.flag.stop)))
        axes.axvspan(*edges, color=_tint(window.flag), alpha=0.16, linewidth=0, zorder=0)
    axes.plot(at, setpoint, color=style.INK, linewidth=0.8, drawstyle="steps-post", zorder=2)
    axes.plot(at, recorded, color=style.RECORD, linewidth=1.1, zorder=3)
    axes.plot(at, replayed, color=style.REPLAY, linewidth=1.3, zorder=4)
    mind_the_signals(axes, content, (setpoint, recorded, replayed))
    axes.set_ylabel(style.with_unit("measurement", clean(content.audit.loop.signals.measurement.unit)))
    return heading(axes, [("recorded", style.RECORD), ("replayed", style.REPLAY), ("setpoint", style.INK)])


def draw_updates(axes: Axes, content: Content, series: Series, window: Window) -> Axes:
    """Draw one tick per update."""
    k = np.flatnonzero(series.updated[window.start : window.stop]) + window.start
    axes.vlines(days(content.audit.record, k), 0.0, 1.0, color=style.REPLAY, linewidth=0.8)
    axes.set(yticks=[], ylim=(0, 1))
    axes.set_ylabel("updates", rotation=0, ha="right", va="center")
    axes.spines[["left", "bottom"]].set_visible(False)
    axes.tick_params(bottom=False)
    return axes


def draw_actuator(axes: Axes, content: Content, series: Series, window: Window) -> Axes:
    """Draw what the actuator did and would have done."""
    record = content.audit.record
    k = np.arange(window.start, window.stop)
    axes.plot(days(record, k), record.u[k], color=style.RECORD, linewidth=1.1, drawstyle="steps-post")
    axes.plot(days(record, k), series.u[k], color=style.REPLAY, linewidth=1.3, drawstyle="steps-post")
    axes.set_ylabel(style.with_unit("actuator", clean(content.audit.loop.signals.actuator.unit)))
    return axes


def _tint(flag: Flag) -> str:
    return style.DANGER if flag.severity == "danger" else style.WATCH
