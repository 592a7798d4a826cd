"""When triggering would have been dangerous: one row per cause, then one per further setting with danger flags."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from auditor.dangers.interval import Flag
from auditor.report.content import Content
from auditor.report.figures import style
from auditor.report.figures.time_axis import clock_axis, days
from auditor.report.phrases import CAUSES, clean, rule_title, settings_text

_NARROWEST = 0.0025


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Row:
    """One line of the strip."""

    name: str
    flags: tuple[Flag, ...]


def compose(content: Content) -> Figure | None:
    """Draw the picture, or return None when no shown setting was flagged."""
    rows = rows_of(content)
    if not rows or len(content.audit.record) < 2:
        return None
    figure = style.new_figure(1.0 + 0.27 * len(rows))
    draw(figure.add_subplot(), content, rows)
    return figure


def rows_of(content: Content) -> list[Row]:
    """Rows of the strip: causes of the setting the pages are about, danger flags of the others."""
    flags = content.audit.flags
    own = [flag for flag in flags if flag.replay == content.focus]
    causes = [cause for cause in CAUSES if any(f.cause == cause for f in own)]
    causes += sorted({f.cause for f in own} - set(CAUSES))
    rows = [Row(name=clean(cause), flags=tuple(f for f in own if f.cause == cause)) for cause in causes]
    others = [i for i in content.shown if i != content.focus]
    return rows + [_other(content, i, [f for f in flags if f.replay == i and f.severity == "danger"]) for i in others]


def _other(content: Content, index: int, flags: Sequence[Flag]) -> Row:
    setting = content.audit.replays[index].setting
    name = f"{index} · {rule_title(setting)}, {settings_text(setting, content.audit.loop)}"
    return Row(name=name if len(name) <= 46 else f"{name[:45]}…", flags=tuple(flags))


def draw(axes: Axes, content: Content, rows: Sequence[Row]) -> Axes:
    """Draw the flags as bars over the record's time."""
    record = content.audit.record
    first, last = float(days(record, 0)), float(days(record, len(record) - 1))
    for level, row in enumerate(rows):
        axes.axhline(level, color=style.HAIR, linewidth=0.6, zorder=0)
        for severity, color, height in (("watch", style.WATCH, 0.34), ("danger", style.DANGER, 0.62)):
            bars = [_bar(content, flag, last - first) for flag in row.flags if flag.severity == severity]
            axes.broken_barh(bars, (level - height / 2, height), facecolors=color, linewidth=0, zorder=2)
    axes.set(ylim=(len(rows) - 0.4, -0.6), yticks=range(len(rows)))
    axes.set_yticklabels([row.name for row in rows])
    axes.tick_params(left=False)
    axes.spines["left"].set_visible(False)
    return clock_axis(axes, record)


def _bar(content: Content, flag: Flag, reach: float) -> tuple[float, float]:
    """Start and width of a bar [days]; a short flag keeps a width that can be seen."""
    start, stop = days(content.audit.record, np.array((flag.start, flag.stop)))
    return float(start), max(float(stop - start), _NARROWEST * reach)
