"""What of the record was used: counted, warm-up, and not used, along time."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from auditor.logs.record import Record, Span
from auditor.report.content import Content
from auditor.report.figures import style
from auditor.report.figures.record import heading
from auditor.report.figures.time_axis import clock_axis, days


def compose(content: Content) -> Figure | None:
    """Draw the picture, or return None for an empty record."""
    if len(content.audit.record) < 2:
        return None
    figure = style.new_figure(1.15)
    draw(figure.add_subplot(), content)
    return figure


def draw(axes: Axes, content: Content) -> Axes:
    """Draw the record's whole time as one strip, and what was found in it as ticks below."""
    record = content.audit.record
    reach = [Span(0, len(record))]
    for spans, color in ((reach, style.HAIR), (record.spans, style.PALE), (content.audit.counted, style.REPLAY)):
        axes.broken_barh(_bars(record, spans), (0.0, 1.0), facecolors=color, linewidth=0)
    found = [finding.start / 86_400e9 for finding in record.findings if finding.start is not None]
    axes.vlines(found, -0.55, -0.15, color=style.DANGER, linewidth=0.8)
    axes.set(yticks=[], ylim=(-0.6, 1.0))
    axes.spines["left"].set_visible(False)
    clock_axis(axes, record)
    words = [("counted", style.REPLAY), ("warm-up or too short", style.PALE), ("not used", style.RECORD)]
    return heading(axes, [*words, ("findings", style.DANGER)])


def _bars(record: Record, spans: Sequence[Span]) -> list[tuple[float, float]]:
    edges = [days(record, np.array((span.start, span.stop))) for span in spans]
    return [(float(start), float(stop - start)) for start, stop in edges]
