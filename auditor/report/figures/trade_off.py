"""RMS error against updates per hour: every rule a curve, the slowed-down clock the one to beat."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

from auditor.arrays import FloatArray, IntArray, read_only
from auditor.replay import Replay
from auditor.report.content import Content, curve_key
from auditor.report.figures import style
from auditor.report.figures.labels import Label, place_labels
from auditor.report.phrases import clean, rule_title


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Curve:
    """The answered settings of one rule, fewest updates first.

    Attributes
    ----------
    rates, errors : ndarray, shape (n,)
        Updates per hour, RMS error [measurement unit].
    rate_ends, error_ends : ndarray, shape (n, 2)
        Their 90 % intervals.
    edge : ndarray of int
        Positions of the settings that no other setting of the rule beats in both.
    """

    name: str
    rates: FloatArray
    errors: FloatArray
    rate_ends: FloatArray
    error_ends: FloatArray
    edge: IntArray
    clock: bool
    focus: bool


def compose(content: Content) -> Figure | None:
    """Draw the picture, or return None when no setting was answered."""
    curves = curves_of(content)
    if not curves or content.audit.baseline is None:
        return None
    figure = style.new_figure(4.6)
    axes = figure.add_subplot()
    labels = draw(axes, content, curves)
    style.settle(figure)
    place_labels(axes, labels, _drawn_points(curves))
    return figure


def curves_of(content: Content) -> list[Curve]:
    """Group the answered replays into one curve per rule and link."""
    groups: dict[tuple[str, str, str, str], list[Replay]] = {}
    for replay in content.audit.replays:
        if replay.answerable and replay.measures.updates_per_hour > 0:
            groups.setdefault(curve_key(replay), []).append(replay)
    focus = content.replay
    return [_curve(group, focus is not None and curve_key(focus) == key) for key, group in groups.items()]


def _curve(group: Sequence[Replay], focus: bool) -> Curve:
    group = sorted(group, key=lambda r: (r.measures.updates_per_hour, r.measures.rms_error))
    errors = np.array([r.measures.rms_error for r in group])
    hours = np.array([r.measures.hours or np.nan for r in group])
    updates = np.array([r.interval90.get("updates", (np.nan, np.nan)) for r in group])
    best = np.minimum.accumulate(errors)
    edge: IntArray = np.flatnonzero(np.r_[True, errors[1:] < best[:-1]]).astype(np.int64)
    return Curve(
        name=rule_title(group[0].setting),
        rates=read_only(np.array([r.measures.updates_per_hour for r in group])),
        errors=read_only(errors),
        rate_ends=read_only(updates / hours[:, None]),
        error_ends=read_only(np.array([r.interval90.get("rms_error", (np.nan, np.nan)) for r in group])),
        edge=edge,
        clock=group[0].setting.rule == "periodic",
        focus=focus,
    )


def draw(axes: Axes, content: Content, curves: Sequence[Curve]) -> list[Label]:
    """Draw every curve, the record, what is accepted and what is recommended; return their names to be placed."""
    _frame(axes, content, curves)
    others = iter(zip(style.CURVES[1:], style.MARKERS[1:], strict=True))
    labels = []
    for curve in sorted(curves, key=lambda c: (c.clock, not c.focus)):
        color, marker = _dress(curve, others)
        _draw_curve(axes, curve, color, marker)
        labels.append(_name(axes, curve, color))
    return [label for label in (*labels, *_marks(axes, content)) if label is not None]


def _drawn_points(curves: Sequence[Curve]) -> FloatArray:
    """Marks, whisker ends and points along the lines, shape (n, 2), for labels to keep clear of."""
    parts = [np.column_stack((c.rates, c.errors)) for c in curves]
    for curve in curves:
        place = np.arange(len(curve.edge))
        along = np.linspace(0, len(place) - 1, 12 * len(place))
        x = np.exp(np.interp(along, place, np.log(curve.rates[curve.edge])))
        parts.append(np.column_stack((x, np.interp(along, place, curve.errors[curve.edge]))))
        if not curve.clock:
            parts += [np.column_stack((curve.rates, end)) for end in curve.error_ends.T]
    return np.concatenate(parts)


def _frame(axes: Axes, content: Content, curves: Sequence[Curve]) -> None:
    audit, unit = content.audit, clean(content.audit.loop.signals.measurement.unit)
    assert audit.baseline is not None
    errors = np.concatenate([c.errors for c in curves])
    rates = np.concatenate([c.rates for c in curves] + [[audit.baseline.updates_per_hour]])
    top, bottom = _reach(content, errors)
    axes.set(ylim=(bottom, top), xscale="log", xlim=(rates.min() / 2.5, rates.max() * 1.7))
    axes.xaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_xlabel("updates per hour (each step to the left is fewer messages)")
    axes.set_ylabel(style.with_unit("RMS error", unit))
    axes.grid(axis="y", color=style.HAIR, linewidth=0.5)
    axes.set_axisbelow(True)
    above = int((errors > top).sum())
    if above:
        words = f"above this picture: {above} setting{'s' if above > 1 else ''} with a larger error"
        axes.text(0.995, 0.985, words, transform=axes.transAxes, ha="right", va="top", fontsize=7.5, color=style.SOFT)


def _reach(content: Content, errors: FloatArray) -> tuple[float, float]:
    """Errors worth a picture: up to half more than what is accepted, or the recommended one."""
    base = content.audit.baseline.rms_error if content.audit.baseline else 0.0
    focus = content.replay.measures.rms_error if content.replay else base
    top = min(float(errors.max()) * 1.06, max(1.8 * base, 1.35 * (content.max_rms_error or base), 1.4 * focus))
    bottom = min(base, float(errors.min()))
    top = top if top > bottom else bottom + (abs(bottom) or 1.0)
    return top, max(0.0, bottom - 0.12 * (top - bottom))


def _dress(curve: Curve, others: Iterator[tuple[str, str]]) -> tuple[str, str]:
    if curve.clock:
        return style.INK, ""
    if curve.focus:
        return style.CURVES[0], style.MARKERS[0]
    return next(others, (style.SOFT, "."))


def _draw_curve(axes: Axes, curve: Curve, color: str, marker: str) -> None:
    edge = curve.edge
    x, y = curve.rates, curve.errors
    width = 1.8 if curve.focus or curve.clock else 0.9
    axes.plot(x[edge], y[edge], color=color, linewidth=width, linestyle="--" if curve.clock else "-", zorder=3)
    if curve.clock:
        return
    axes.plot(x, y, linestyle="", marker=marker, markersize=4 if curve.focus else 3, color=color, zorder=4)
    whisker: dict[str, Any] = {
        "color": color,
        "linewidth": 1.0 if curve.focus else 0.7,
        "alpha": 1.0 if curve.focus else 0.4,
    }
    axes.vlines(x[edge], *curve.error_ends[edge].T, zorder=2, **whisker)
    axes.hlines(y[edge], *curve.rate_ends[edge].T, zorder=2, **whisker)


def _name(axes: Axes, curve: Curve, color: str) -> Label | None:
    """The curve's name at its end with the fewest updates that is still in the picture."""
    top = axes.get_ylim()[1]
    seen = [i for i in curve.edge if curve.errors[i] <= top]
    if not seen:
        return None
    name = "the clock, slowed down" if curve.clock else curve.name
    weight = "bold" if curve.focus else "normal"
    return Label(text=name, x=curve.rates[seen[0]], y=curve.errors[seen[0]], color=color, weight=weight)


def _marks(axes: Axes, content: Content) -> list[Label]:
    """The record, the accepted corner, and the setting the pages are about."""
    audit, replay = content.audit, content.replay
    assert audit.baseline is not None
    x, y = audit.baseline.updates_per_hour, audit.baseline.rms_error
    labels = [Label(text="the record", x=x, y=y, color=style.INK)]
    axes.plot(x, y, marker="s", color=style.INK, markersize=5, zorder=6)
    _accepted(axes, content, x * (1 - audit.loop.accept.min_saved_fraction))
    if replay is not None:
        x, y = replay.measures.updates_per_hour, replay.measures.rms_error
        axes.plot(x, y, marker="o", markersize=12, fillstyle="none", color=style.INK, markeredgewidth=1.3, zorder=7)
        word = "recommended" if content.recommended else "best candidate"
        labels.append(Label(text=word, x=x, y=y, color=style.INK, weight="bold"))
    return labels


def _accepted(axes: Axes, content: Content, fastest: float) -> None:
    if content.max_rms_error is None:
        return
    low, left = axes.get_ylim()[0], axes.get_xlim()[0]
    axes.fill_between((left, fastest), low, content.max_rms_error, color=style.ALLOWED, linewidth=0, zorder=0)
    words = "accepted: error small enough, saving large enough"
    axes.annotate(
        words,
        (left, low),
        xytext=(5, 5),
        textcoords="offset points",
        fontsize=7.5,
        color=style.SOFT,
        zorder=1,
    )
