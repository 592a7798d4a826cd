from __future__ import annotations

import itertools

import numpy as np
import pytest

from auditor.report.figures import style

# Machado, Oliveira & Fernandes 2009, severity 1.0: what a reader without one cone type sees, in linear RGB.
READERS = {
    "all cones": np.eye(3),
    "no long": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
    "no middle": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
    "no short": np.array(
        [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]]
    ),
}
TO_XYZ = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])


def _linear(color: str) -> np.ndarray:
    channels = np.array([int(color[i : i + 2], 16) for i in (1, 3, 5)]) / 255
    return np.where(channels <= 0.04045, channels / 12.92, ((channels + 0.055) / 1.055) ** 2.4)


def _lab(linear: np.ndarray) -> np.ndarray:
    xyz = TO_XYZ @ np.clip(linear, 0, 1) / np.array([0.9505, 1.0, 1.089])
    f = np.where(xyz > 0.008856, np.cbrt(xyz), 7.787 * xyz + 16 / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def _contrast(one: str, other: str) -> float:
    low, high = sorted(float(TO_XYZ[1] @ _linear(color)) for color in (one, other))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("reader", READERS)
@pytest.mark.parametrize(
    "colors",
    [style.CURVES, (style.RECORD, style.REPLAY, style.INK), (style.DANGER, style.WATCH, style.HAIR)],
)
def test_colors_stay_apart_for_every_reader(colors: tuple[str, ...], reader: str) -> None:
    seen = [_lab(READERS[reader] @ _linear(color)) for color in colors]
    # A distance of 10 in CIELAB is plainly visible side by side; twice that also between thin lines.
    assert min(np.linalg.norm(a - b) for a, b in itertools.combinations(seen, 2)) > 20


@pytest.mark.parametrize("color", [*style.CURVES, style.PALE, style.WATCH, style.DANGER, style.SOFT, style.INK])
def test_lines_and_names_can_be_read_on_the_panel(color: str) -> None:
    # 3:1 is what WCAG 2.1 (1.4.11) asks of graphics.
    assert _contrast(color, style.PANEL) >= 3.0


def test_every_curve_color_has_its_own_marker() -> None:
    assert len(set(style.MARKERS)) == len(style.CURVES)
