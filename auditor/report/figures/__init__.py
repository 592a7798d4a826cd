"""Pictures of an audit: one per file, one line each in `FIGURES`."""

from __future__ import annotations

from collections.abc import Callable

from matplotlib.figure import Figure

from auditor.report.content import Content
from auditor.report.figures import dangers, draws, record, spans, step_response, style, trade_off, window

FIGURES: dict[str, Callable[[Content], Figure | None]] = {
    "trade-off": trade_off.compose,
    "record": record.compose,
    "window": window.compose,
    "dangers": dangers.compose,
    "spans": spans.compose,
    "step-response": step_response.compose,
    "draws": draws.compose,
}


def draw_all(content: Content) -> dict[str, Figure]:
    """Draw every picture there is something to show in."""
    with style.drawing():
        composed = {name: compose(content) for name, compose in FIGURES.items()}
        drawn = {name: figure for name, figure in composed.items() if figure is not None}
        for figure in drawn.values():
            style.settle(figure)
    return drawn


__all__ = ["FIGURES", "draw_all"]
