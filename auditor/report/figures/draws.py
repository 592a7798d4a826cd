"""How far the likely plants agree on the answer: one dot per plant, the interval, and the naive count."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from auditor.arrays import FloatArray
from auditor.report.content import Content
from auditor.report.figures import style
from auditor.report.phrases import clean
from auditor.text import number

_BINS = 26


def compose(content: Content) -> Figure | None:
    """Draw the picture, or return None when no setting was answered."""
    replay = content.replay
    if replay is None or not all(len(replay.members.get(name, ())) for name in ("updates", "rms_error")):
        return None
    figure = style.new_figure(1.9)
    left, right = figure.subplots(1, 2)
    unit = clean(content.audit.loop.signals.measurement.unit)
    draw(left, replay.members["updates"], replay.interval90["updates"], replay.naive_updates)
    left.set_xlabel("updates in the counted time")
    draw(right, replay.members["rms_error"], replay.interval90["rms_error"], replay.naive_rms_error)
    right.set_xlabel(style.with_unit("RMS error", unit))
    return figure


def draw(axes: Axes, members: FloatArray, interval: tuple[float, float], naive: float) -> Axes:
    """Stack one dot per draw above its value.

    Parameters
    ----------
    members : ndarray, shape (draws,)
    interval : (float, float)
        90 % interval of the answer, drawn below the dots.
    naive : float
        The answer with the model left out; named at the edge when it lies outside the picture.
    """
    members = members[np.isfinite(members)]
    ends = np.array([*interval, members.min(), members.max()])
    ends = ends[np.isfinite(ends)]
    room = (ends.max() - ends.min()) or abs(ends.max()) * 0.01 or 1.0
    low, high = float(ends.min() - 0.35 * room), float(ends.max() + 0.35 * room)
    x, level = _stacked(members, low, high)
    axes.plot(x, level, linestyle="", marker="o", markersize=4.2, color=style.REPLAY, markeredgecolor=style.PANEL)
    axes.plot(interval, (-0.9, -0.9), color=style.INK, linewidth=2.2, solid_capstyle="butt")
    axes.set(xlim=(low, high), ylim=(-1.8, max(6.0, level.max() + 2.5)), yticks=[])
    axes.spines["left"].set_visible(False)
    axes.locator_params(axis="x", nbins=5)
    return _naive(axes, naive, low, high)


def _stacked(members: FloatArray, low: float, high: float) -> tuple[FloatArray, FloatArray]:
    columns = np.clip(((members - low) / (high - low) * _BINS).astype(np.int64), 0, _BINS - 1)
    order = np.argsort(members, kind="stable")
    levels = np.zeros(len(members))
    for column in np.unique(columns):
        inside = order[columns[order] == column]
        levels[inside] = np.arange(len(inside))
    return low + (columns + 0.5) * (high - low) / _BINS, levels


def _naive(axes: Axes, naive: float, low: float, high: float) -> Axes:
    if not np.isfinite(naive):
        return axes
    top = axes.get_ylim()[1]
    if low <= naive <= high:
        axes.axvline(naive, color=style.CURVES[1], linewidth=1.0, linestyle=(0, (3, 2)))
        words, x, side = "\u2002without a model\u2002", naive, "left" if naive < (low + high) / 2 else "right"
    elif naive < low:
        words, x, side = f"← without a model: {number(naive)}", low, "left"
    else:
        words, x, side = f"without a model: {number(naive)} →", high, "right"
    axes.text(x, top, words, color=style.CURVES[1], fontsize=8, ha=side, va="top")
    return axes
