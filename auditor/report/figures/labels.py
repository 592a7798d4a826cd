"""Direct labels: each name beside its curve, moved until names neither cover each other nor the points."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes

from auditor.arrays import FloatArray
from auditor.report.figures import style

_LETTER, _LINE = 0.58, 1.25
_CLASH, _COVER, _OUTSIDE, _FAR = 60.0, 5.0, 8.0, 0.12


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Label:
    """A name to put beside the point (x, y), in data coordinates."""

    text: str
    x: float
    y: float
    color: str
    weight: str = "normal"


@dataclass(frozen=True, slots=True)
class Place:
    """Where a name may stand: right (1) or left (−1) of its point, `away` [pt] aside and `up` [pt] higher."""

    side: int
    away: float
    up: float

    @property
    def distance(self) -> float:
        """Distance from the point [pt]."""
        return float(np.hypot(self.away, self.up))


PLACES = tuple(
    Place(side, away, up)
    for away in (8.0, 24.0, 48.0)
    for up in (0.0, 10.0, -10.0, 20.0, -20.0, 32.0, -32.0, 46.0, -46.0)
    for side in (-1, 1)
)


def place_labels(axes: Axes, labels: Sequence[Label], points: FloatArray, size: float = 8.0) -> Axes:
    """Write every label beside its point; the axes' place in the picture and their limits must be final.

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
    # Bold names stand where they like; the others find room around them.
    for label in sorted(labels, key=lambda one: (one.weight != "bold", -one.y, one.x, one.text)):
        anchor = axes.transData.transform((label.x, label.y)) * dots
        boxes = [_box(anchor, label.text, size, place) for place in PLACES]
        costs = [_cost(box, taken, busy, frame) + _FAR * p.distance for box, p in zip(boxes, PLACES, strict=True)]
        chosen = int(np.argmin(costs))
        taken.append(boxes[chosen])
        _write(axes, label, PLACES[chosen], size)
    return axes


def _box(anchor: FloatArray, text: str, size: float, place: Place) -> FloatArray:
    """Corners ((x0, y0), (x1, y1)) of a text beside `anchor` [pt]."""
    width, height = _LETTER * size * len(text), _LINE * size
    left = anchor[0] + place.away if place.side > 0 else anchor[0] - place.away - width
    bottom = anchor[1] + place.up - height / 2
    return np.array(((left, bottom), (left + width, bottom + height)))


def _cost(box: FloatArray, taken: Sequence[FloatArray], busy: FloatArray, frame: FloatArray) -> float:
    clashes = sum(bool((box[0] < other[1]).all() and (other[0] < box[1]).all()) for other in taken)
    covered = int(((busy > box[0]) & (busy < box[1])).all(axis=1).sum())
    outside = float(np.maximum(frame[0] - box[0], 0).sum() + np.maximum(box[1] - frame[1], 0).sum())
    return _CLASH * clashes + _COVER * covered + _OUTSIDE * outside


def _write(axes: Axes, label: Label, place: Place, size: float) -> None:
    leader = {"arrowstyle": "-", "color": label.color, "linewidth": 0.5, "shrinkA": 0, "shrinkB": 3}
    axes.annotate(
        label.text,
        (label.x, label.y),
        xytext=(place.side * place.away, place.up),
        textcoords="offset points",
        ha="left" if place.side > 0 else "right",
        va="center",
        fontsize=size,
        color=label.color,
        weight=label.weight,
        arrowprops=leader if place.distance > 14.0 else None,
        bbox={"boxstyle": "square,pad=0.05", "facecolor": style.PANEL, "edgecolor": "none", "alpha": 0.75},
        zorder=8,
        annotation_clip=False,
    ).set_in_layout(False)
