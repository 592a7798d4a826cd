"""Direct labels: each name beside its curve, moved until names neither cover each other nor the points."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes

from auditor.arrays import FloatArray

_LETTER, _LINE, _AWAY = 0.58, 1.25, 8.0
# Offsets to try, in letters and lines from the anchor: near before far, left before right.
_SIDES = [(side, up) for up in (0.0, 1.0, -1.0, 1.9, -1.9, 2.8, -2.8, 3.7, -3.7) for side in (-1, 1)]


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Label:
    """A name to put beside the point (x, y), in data coordinates."""

    text: str
    x: float
    y: float
    color: str
    weight: str = "normal"


def place_labels(axes: Axes, labels: Sequence[Label], points: FloatArray, size: float = 8.0) -> Axes:
    """Write every label beside its point; the axes' limits must be final.

    Parameters
    ----------
    points : ndarray, shape (n, 2)
        Points in data coordinates that labels should leave free.
    size : float
        Font size [pt].
    """
    dots = 72.0 / axes.figure.dpi
    frame = axes.get_window_extent().get_points() * dots
    busy = axes.transData.transform(points) * dots if len(points) else np.empty((0, 2))
    taken: list[FloatArray] = []
    for label in sorted(labels, key=lambda one: (-one.y, one.x, one.text)):
        anchor = axes.transData.transform((label.x, label.y)) * dots
        boxes = [_box(anchor, label.text, size, side, up) for side, up in _SIDES]
        costs = [_cost(box, taken, busy, frame) + 0.3 * i for i, box in enumerate(boxes)]
        chosen = int(np.argmin(costs))
        taken.append(boxes[chosen])
        _write(axes, label, anchor, boxes[chosen], _SIDES[chosen], size)
    return axes


def _box(anchor: FloatArray, text: str, size: float, side: int, up: float) -> FloatArray:
    """Corners ((x0, y0), (x1, y1)) of a text beside `anchor` [pt]."""
    width, height = _LETTER * size * len(text), _LINE * size
    left = anchor[0] + _AWAY if side > 0 else anchor[0] - _AWAY - width
    bottom = anchor[1] + up * height - height / 2
    return np.array(((left, bottom), (left + width, bottom + height)))


def _cost(box: FloatArray, taken: Sequence[FloatArray], busy: FloatArray, frame: FloatArray) -> float:
    clashes = sum(bool((box[0] < other[1]).all() and (other[0] < box[1]).all()) for other in taken)
    covered = int(((busy > box[0]) & (busy < box[1])).all(axis=1).sum())
    outside = float(np.maximum(frame[0] - box[0], 0).sum() + np.maximum(box[1] - frame[1], 0).sum())
    return 60.0 * clashes + 5.0 * covered + 5.0 * outside


def _write(axes: Axes, label: Label, anchor: FloatArray, box: FloatArray, place: tuple[int, float], size: float) -> None:
    side, up = place
    offset = (_AWAY if side > 0 else -_AWAY, float(box[:, 1].mean() - anchor[1]))
    leader = {"arrowstyle": "-", "color": label.color, "linewidth": 0.5, "shrinkA": 0, "shrinkB": 2}
    axes.annotate(
        label.text,
        (label.x, label.y),
        xytext=offset,
        textcoords="offset points",
        ha="left" if side > 0 else "right",
        va="center",
        fontsize=size,
        color=label.color,
        weight=label.weight,
        arrowprops=leader if abs(up) > 1.0 else None,
        zorder=8,
        annotation_clip=False,
    ).set_in_layout(False)
