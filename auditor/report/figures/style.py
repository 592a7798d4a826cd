"""How every picture looks: one light panel, few colours that colour-blind readers tell apart, direct labels."""

from __future__ import annotations

import io
import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from types import MappingProxyType
from typing import Any

import matplotlib as mpl
from matplotlib.figure import Figure

PANEL = "#fcfbf7"
INK = "#1e2a32"
SOFT = "#64717a"
HAIR = "#d9d5ca"
RECORD = "#8b949a"
REPLAY = "#0a5c84"
DANGER = "#a8321c"
WATCH = "#b97d0a"
ALLOWED = "#e9eee6"

PALE = "#4a97ba"

# Chosen so that every two stay apart for readers without one of the three cone types, and can be read on the panel.
CURVES = ("#0a5c84", "#a63618", "#8c9917", "#9a59c8", "#7f413e", "#738fa4", "#c7796f", "#521d89")
MARKERS = ("o", "s", "^", "D", "v", "P", "X", "h")

WIDTH = 7.2
"""Width of every picture [in]."""

STYLE: Mapping[str, Any] = MappingProxyType(
    {
        "font.size": 8.5,
        # The first family measures the layout and comes with matplotlib; the others are narrower, so texts still fit.
        "font.sans-serif": ["DejaVu Sans", "Segoe UI", "Helvetica Neue", "Arial"],
        "font.family": "sans-serif",
        "figure.facecolor": PANEL,
        "axes.facecolor": PANEL,
        "savefig.facecolor": PANEL,
        "axes.edgecolor": SOFT,
        "axes.linewidth": 0.6,
        "axes.spines.top": False,
        "axes.spines.right": False,
        "axes.labelcolor": SOFT,
        "axes.labelsize": 8.5,
        "xtick.color": SOFT,
        "ytick.color": SOFT,
        "xtick.labelsize": 8.0,
        "ytick.labelsize": 8.0,
        "xtick.major.width": 0.6,
        "ytick.major.width": 0.6,
        "xtick.minor.width": 0.4,
        "text.color": INK,
        "lines.linewidth": 1.2,
        "lines.solid_capstyle": "round",
        "svg.fonttype": "none",
        "svg.hashsalt": "auditor",
        "text.parse_math": False,
        "axes.formatter.use_mathtext": False,
        "axes.formatter.useoffset": False,
    }
)


@contextmanager
def drawing() -> Iterator[None]:
    """Draw in the house style; a sign that the measuring font lacks is the reader's font's business."""
    settings: Any = dict(STYLE)
    with mpl.rc_context(settings), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from")
        yield


def new_figure(height: float) -> Figure:
    """Return an empty picture of the common width and the given height [in]."""
    return Figure(figsize=(WIDTH, height), layout="constrained")


def settle(figure: Figure) -> Figure:
    """Lay a picture out once, so that every format of it is the same picture."""
    figure.draw_without_rendering()
    figure.set_layout_engine("none")
    return figure


def svg(figure: Figure) -> str:
    """Return a picture as SVG text without a date, so that the same picture is the same text."""
    sink = io.BytesIO()
    with drawing():
        figure.savefig(sink, format="svg", metadata={"Date": None, "Creator": None})
    return sink.getvalue().decode("utf-8")


def png(figure: Figure) -> bytes:
    """Return a picture as PNG, 200 dots per inch."""
    sink = io.BytesIO()
    with drawing():
        figure.savefig(sink, format="png", dpi=200, metadata={"Software": None})
    return sink.getvalue()


def with_unit(name: str, unit: str) -> str:
    """Write an axis label with its unit."""
    return f"{name} [{unit}]" if unit else name
