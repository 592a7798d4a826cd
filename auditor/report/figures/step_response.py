"""How the identified plants answer a step of the actuator: the likeliest one and the band of all."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from auditor.errors import OutputError, Problem
from auditor.identify.plant import Model
from auditor.report.content import Content
from auditor.report.figures import style
from auditor.report.figures.record import heading
from auditor.report.parameters import StepResponses, step_responses
from auditor.report.phrases import clean
from auditor.text import TIME_UNITS


def compose(content: Content) -> Figure | None:
    """Draw the picture, or return None without a model."""
    if content.audit.model is None:
        return None
    figure = style.new_figure(2.7)
    signals = content.audit.loop.signals
    draw(figure.add_subplot(), step_responses(content.audit.model), clean(signals.measurement.unit))
    return figure


def picture(model: Model, unit: str, suffix: str) -> bytes:
    """Draw the step responses of a model alone, as the bytes of an `.svg` or `.png` file.

    Raises
    ------
    OutputError
        Another suffix is asked for.
    """
    check_suffix(suffix)
    with style.drawing():
        figure = style.new_figure(2.7)
        draw(figure.add_subplot(), step_responses(model), clean(unit))
        return style.png(figure) if suffix == ".png" else style.svg(figure).encode("utf-8")


def check_suffix(suffix: str) -> None:
    """Say whether a picture can be written with this suffix before anything is computed for it.

    Raises
    ------
    OutputError
        It is neither `.svg` nor `.png`.
    """
    if suffix not in (".svg", ".png"):
        raise OutputError(Problem(what="no such picture format", found=suffix or "no suffix", expected=".png or .svg"))


def draw(axes: Axes, answers: StepResponses, unit: str) -> Axes:
    """Draw the middle 90 % of the draws as a band, each draw as a thin line, the likeliest thick."""
    size, name = next((s for s in TIME_UNITS if answers.seconds[-1] >= 3 * s[0]), TIME_UNITS[-1])
    at = answers.seconds / size
    low, high = np.quantile(answers.all, (0.05, 0.95), axis=0)
    axes.fill_between(at, low, high, color=style.PALE, alpha=0.35, linewidth=0)
    axes.plot(at, answers.all.T, color=style.PALE, linewidth=0.4, alpha=0.7)
    axes.plot(at, answers.likeliest, color=style.REPLAY, linewidth=1.8)
    axes.axhline(0.0, color=style.SOFT, linewidth=0.5)
    axes.set_xlabel(f"time since the step [{name}]")
    axes.set_ylabel(style.with_unit("measurement", unit))
    axes.set_xlim(0, at[-1])
    words = [("likeliest plant", style.REPLAY), (f"all {len(answers.all)} likely plants, 5–95 % shaded", style.PALE)]
    return heading(axes, words)
