"""Draw what every finding looks like in a log: `python docs/make_pictures.py`, into `docs/pictures/findings/`.

The logs are invented: a level held at a target by a gate, as in an irrigation canal's pool, a row a minute, damaged on
purpose. Same seed, same picture.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import matplotlib
import numpy as np

matplotlib.use("Agg")
import matplotlib.pyplot as plt
from matplotlib.axes import Axes
from numpy.typing import NDArray

FOLDER = Path(__file__).parent / "pictures" / "findings"
SEED = 7
ROWS = 240
LEVEL, GATE, TARGET, MARK = "#0b4f8a", "#6d6d6d", "#b0b0b0", "#c2410c"

Array = NDArray[np.float64]


@dataclass
class Sketch:
    """Two hours or four of a log; `marks` are the stretches that the finding tells."""

    minute: Array
    level: Array
    target: Array
    gate: Array
    marks: list[tuple[float, float]] = field(default_factory=list)
    note: str = ""
    view: tuple[float, float] | None = None


def steps_of_target() -> Array:
    """Return the usual target: one step."""
    return np.where(np.arange(ROWS) < 150, 2.0, 2.05)


def run(target: Array, by_hand: slice = slice(0), opening: float = 50.0) -> Sketch:
    """Return a loop that holds its level under a slow load, with some noise; `by_hand` the gate stands at `opening`."""
    rng = np.random.default_rng(SEED)
    level, gate = np.full(ROWS, 2.0), np.full(ROWS, 50.0)
    load, summed = 0.0, 50.0
    for k in range(1, ROWS):
        load = 0.97 * load + rng.normal(0, 0.15)
        level[k] = level[k - 1] + 0.0015 * (gate[k - 1] - 50 - load)
        error = target[k] - level[k]
        summed += 4 * error
        gate[k] = summed + 120 * error
        if by_hand.start is not None and by_hand.start <= k < by_hand.stop:
            gate[k] = opening
            summed = opening - 120 * error
    noisy = level + rng.normal(0, 0.003, ROWS)
    return Sketch(minute=np.arange(float(ROWS)), level=noisy, target=target, gate=gate)


def take(s: Sketch, other: Sketch) -> None:
    """Take the signals of another run."""
    s.level, s.target, s.gate = other.level, other.target, other.gate


def lose(s: Sketch, rows: list[int]) -> None:
    """Leave nothing in these rows."""
    s.level[rows] = s.gate[rows] = np.nan


def keep(s: Sketch, rows: NDArray[np.int64]) -> None:
    """Leave only these rows."""
    s.minute, s.level, s.target, s.gate = s.minute[rows], s.level[rows], s.target[rows], s.gate[rows]


def coverage(s: Sketch) -> None:
    s.level[90:110] = np.nan
    s.marks, s.note = [(0, 239)], "240 samples, 92 % usable"


def stray_stamp(s: Sketch) -> None:
    s.minute[-1] = 420
    s.marks, s.note = [(415, 425)], "one row far from the rest of the log"


def backward_clock(s: Sketch) -> None:
    s.minute[100:] -= 12
    s.view = (60, 130)
    s.marks, s.note = [(88, 100)], "the clock runs over twelve minutes twice"


def duplicate(s: Sketch) -> None:
    s.view = (40, 90)
    again = np.array([60, 61, 62, 63])
    keep(s, np.sort(np.concatenate((np.arange(ROWS), again))))
    s.level[np.array([61, 63, 65, 67])] += 0.03
    s.marks, s.note = [(59, 64)], "two values under one stamp"


def clock_step(s: Sketch) -> None:
    s.minute[120:] += 0.5
    s.view = (110, 130)
    s.marks, s.note = [(119, 120.5)], "all later stamps half a minute late"


def clock_drift(s: Sketch) -> None:
    s.minute *= 1.04
    s.note = "240 rows that should last 240 minutes last 250"
    s.marks = [(239, 249)]


def jitter(s: Sketch) -> None:
    s.view = (145, 175)
    s.minute += np.random.default_rng(1).uniform(-0.45, 0.45, len(s.minute))
    s.marks, s.note = [(0, 239)], "stamps early and late by up to half a minute"


def coarse_log(s: Sketch) -> None:
    keep(s, np.arange(0, ROWS, 8))
    s.marks, s.note = [(0, 232)], "a row every eight minutes of a loop that runs every minute"


def fine_log(s: Sketch) -> None:
    s.view = (145, 175)
    fine = np.arange(0, ROWS - 1, 0.25)
    held = np.floor(fine).astype(np.int64)
    level = np.interp(fine, s.minute, s.level) + np.random.default_rng(2).normal(0, 0.002, len(fine))
    s.minute, s.level, s.target, s.gate = fine, level, s.target[held], s.gate[held]
    s.marks, s.note = [(0, 239)], "four rows per step of the gate"


def mixed_period(s: Sketch) -> None:
    keep(s, np.r_[0:120, 120:ROWS:6])
    s.marks, s.note = [(120, 239)], "a row a minute, then one every six"


def gap(s: Sketch) -> None:
    lose(s, list(range(101, 140)))
    s.marks, s.note = [(100, 139)], "no row for forty minutes"


def bridged(s: Sketch) -> None:
    lose(s, [50, 51, 72, 90, 91])
    s.view = (40, 100)
    s.marks, s.note = [(49.5, 51.5), (71.5, 72.5), (89.5, 91.5)], "holes of one and two rows, held"


def manual(s: Sketch) -> None:
    take(s, run(steps_of_target(), slice(90, 130), 49.0))
    s.marks, s.note = [(90, 129)], "the mode says MAN: not used"


def excluded(s: Sketch) -> None:
    s.marks, s.note = [(90, 129)], "left out by the owner"


def bad_value(s: Sketch) -> None:
    s.level[90:120] = np.nan
    s.marks, s.note = [(90, 119)], "rows without a level, the gate goes on"


def on_change(s: Sketch) -> None:
    kept = np.full(ROWS, np.nan)
    last = np.inf
    for k in range(ROWS):
        if abs(s.level[k] - last) > 0.006 or k == 0:
            kept[k] = last = s.level[k]
    s.level = kept
    s.marks, s.note = [(0, 239)], "a value only where it has changed"


def sentinel(s: Sketch) -> None:
    s.level[[60, 61, 150]] = -9.999
    s.marks, s.note = [(59, 62), (149, 151)], "−9.999 three times: no value"


def out_of_range(s: Sketch) -> None:
    s.level[[70, 71, 72, 170]] = [2.62, 2.66, 2.61, 2.71]
    s.marks, s.note = [(69, 73), (169, 171)], "above the stated range of 1.5 to 2.6 m"


def spike(s: Sketch) -> None:
    s.level[[55, 130, 200]] += [0.12, -0.09, 0.15]
    s.marks, s.note = [(54, 56), (129, 131), (199, 201)], "single values far from both neighbours"


def sensor_reset(s: Sketch) -> None:
    s.level[60:66] = s.level[170:174] = 1.8
    s.marks, s.note = [(59, 66), (169, 174)], "to 1.8 m exactly, and back"


def range_wrap(s: Sketch) -> None:
    s.level = (350 + 900 * (s.level - 2.0)) % 360
    s.target = np.full(ROWS, np.nan)
    jumps = np.flatnonzero(np.abs(np.diff(s.level)) > 180)
    s.marks = [(float(k), float(k + 1)) for k in jumps]
    s.note = "an angle past north"


def unit_change(s: Sketch) -> None:
    s.level[130:] *= 3.2808
    s.marks, s.note = [(130, 239)], "metres, then feet"


def stuck(s: Sketch) -> None:
    s.level[80:150] = s.level[80]
    s.gate[80:150] += np.linspace(0, 9, 70)
    s.gate[150:] += 9 * np.exp(-np.arange(90) / 20)
    s.marks, s.note = [(80, 149)], "one value for seventy minutes"


def stale_hold(s: Sketch) -> None:
    for k in (50, 110, 190):
        s.level[k : k + 9] = s.level[k]
        s.marks.append((float(k), k + 8.0))
    s.note = "old values repeated while the gate moves"


def interpolated(s: Sketch) -> None:
    knots = np.arange(0, ROWS, 15)
    s.level = np.interp(s.minute, s.minute[knots], s.level[knots])
    s.marks, s.note = [(0, 225)], "fourteen points on a line, then a value"


def exception_reported(s: Sketch) -> None:
    for k in range(1, ROWS):
        if abs(s.level[k] - s.level[k - 1]) < 0.012:
            s.level[k] = s.level[k - 1]
    s.marks, s.note = [(0, 239)], "no change smaller than 12 mm"


def quantised(s: Sketch) -> None:
    s.level = 0.01 * np.round(s.level / 0.01)
    s.gate = 2.0 * np.round(s.gate / 2.0)
    s.marks, s.note = [(0, 239)], "level in steps of 10 mm, gate in steps of 2 %"


def setpoint_ramp(s: Sketch) -> None:
    take(s, run(np.interp(s.minute, [0, 100, 180, 239], [2.0, 2.0, 2.1, 2.1])))
    s.marks, s.note = [(100, 180)], "the target moves every minute"


def saturation(s: Sketch) -> None:
    high = float(np.quantile(s.gate, 0.8))
    at = s.gate >= high
    s.gate = np.minimum(s.gate, high)
    edges = np.flatnonzero(np.diff(np.r_[0, at.astype(int), 0]))
    s.marks = [(float(a) - 0.5, float(b) - 0.5) for a, b in zip(edges[::2], edges[1::2], strict=True)]
    s.note = "the gate at its upper limit"


def constant_actuator(s: Sketch) -> None:
    s.gate[:] = 50.0
    s.level = 2.0 + np.cumsum(np.random.default_rng(3).normal(0, 0.002, ROWS))
    s.target[:] = 2.0
    s.marks, s.note = [(0, 239)], "the gate never moves"


SKETCHES: dict[str, Callable[[Sketch], None]] = {
    name.replace("_", "-"): draw
    for name, draw in list(globals().items())
    if callable(draw) and getattr(draw, "__annotations__", {}) == {"s": "Sketch", "return": "None"}
}
"""By kind of finding."""


def draw_level(axes: Axes, s: Sketch) -> None:
    """Draw measurement and setpoint."""
    axes.plot(s.minute, s.target, color=TARGET, linewidth=1.2, drawstyle="steps-post", label="target")
    axes.plot(s.minute, s.level, color=LEVEL, linewidth=0.6, marker=".", markersize=3.2, label="level")
    axes.set_ylabel("level")
    axes.legend(loc="upper left", fontsize=7, frameon=False, ncols=2)


def draw(kind: str) -> None:
    """Draw one finding: the level with its target above, the gate below, the told stretches shaded."""
    s = run(steps_of_target())
    SKETCHES[kind](s)
    figure, (above, below) = plt.subplots(
        2, 1, sharex=True, figsize=(5.6, 2.7), height_ratios=(2, 1), layout="constrained"
    )
    draw_level(above, s)
    below.plot(s.minute, s.gate, color=GATE, linewidth=1.0, drawstyle="steps-post")
    below.set_ylabel("gate %")
    below.set_xlabel("minute")
    for axes in (above, below):
        axes.tick_params(labelsize=7)
        axes.spines[["top", "right"]].set_visible(False)
        for start, end in s.marks:
            axes.axvspan(start, end, color=MARK, alpha=0.13, linewidth=0)
    if s.view is not None:
        below.set_xlim(*s.view)
    low, high = above.get_ylim()
    above.set_ylim(low, high + 0.15 * (high - low))
    figure.suptitle(f"{kind}: {s.note}", fontsize=9, x=0.01, ha="left", color=MARK)
    figure.savefig(FOLDER / f"{kind}.png", dpi=90, metadata={"Software": None})
    plt.close(figure)


def main() -> None:
    """Draw all of them."""
    FOLDER.mkdir(parents=True, exist_ok=True)
    for kind in SKETCHES:
        draw(kind)


if __name__ == "__main__":
    main()
