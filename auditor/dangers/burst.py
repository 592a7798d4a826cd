"""More updates than the link can carry, or updates at every sample as if there were no rule.

Two clauses. Over budget: more of the loop's own updates in any `channel.window` than `max_messages` less
`other_traffic`, or than `airtime` and `duty_cycle` leave room for; marked from the first to the last update of every
such window. Continuous: an update at every sample for longer than the settling time; a clock (`periodic`) is left out
here, because updating at every sample is then what was asked for and what the recorded loop did. It is "danger" only
where at least half of the likely plants are over a declared budget: at the base rate the loop itself runs as
recorded. Evidence: the most updates in one window against the budget, or how long the run of updates was.
"""

from __future__ import annotations

import math

import numpy as np

from auditor.arrays import BoolArray, IntArray
from auditor.dangers.base import LIKELY, Case, Evidence, Stretch
from auditor.dangers.interval import Runs, longer_than, longest_run, paint
from auditor.loop import Channel
from auditor.text import duration, number

CAUSE = "burst"
MEANING = "more updates than the link should carry"


def find(case: Case) -> dict[str, BoolArray]:
    """Mark crowded windows and runs of updates."""
    updated = case.only_counted(case.updated)
    parts = {}
    if case.loop.channel is not None:
        parts["over budget"] = _crowded(updated, _window(case), _budget(case.loop.channel))
    if case.setting.rule != "periodic":
        parts["continuous"] = longer_than(updated, case.settling)
    return parts


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Only over a declared budget."""
    over = stretch.parts.get("over budget")
    return over is not None and bool(over.any(axis=0).mean() >= LIKELY)


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell the fullest window, else the longest run."""
    over, channel = stretch.parts.get("over budget"), case.loop.channel
    if channel is None or over is None or not over.any():
        run_s = float(np.median(longest_run(stretch.mask)[stretch.lanes])) * case.period
        return Evidence(f"an update at every sample {stretch.lasting()}", {"run_s": run_s})
    fullest = _fullest(case.updated[stretch.start : stretch.stop] & over, _window(case))
    most, budget = float(np.median(fullest[over.any(axis=0)])), _budget(channel)
    detail = (
        f"up to {number(most, 2)} updates within {duration(channel.window)} where the channel has room for "
        f"{number(max(budget, 0.0), 2)}, {stretch.lasting()}"
    )
    return Evidence(detail, {"worst": most, "budget": budget, "window_s": channel.window})


def _budget(channel: Channel) -> float:
    """Messages of this loop that a window has room for.

    With a stated airtime no more than fit into the window one after the other, others' included; with a duty cycle no
    more than its share of the window, which binds each sender by itself.
    """
    counted = channel.max_messages - channel.other_traffic
    if channel.airtime is None:
        return counted
    fitting = channel.window / channel.airtime
    own = fitting - channel.other_traffic if channel.duty_cycle is None else channel.duty_cycle * fitting
    return min(counted, own)


def _window(case: Case) -> int:
    """Most samples that any stretch of time as long as the window can hold."""
    channel = case.loop.channel
    return 1 if channel is None else max(1, math.ceil(channel.window / case.period - 1e-9))


def _crowded(updated: BoolArray, window: int, budget: float) -> BoolArray:
    """Mark from the first to the last of every `budget` + 1 updates that fit into one window, shape (N, L)."""
    many = max(1, math.floor(budget + 1e-9) + 1)
    if many > window:
        return np.zeros_like(updated)
    lane, sample = np.nonzero(updated.T)
    first, last = sample[: len(sample) - many + 1], sample[many - 1 :]
    same_lane = lane[: len(first)] == lane[len(lane) - len(last) :]
    crowded = same_lane & (last - first < window)
    return paint(Runs(lane[: len(first)], first, last + 1).where(crowded), updated.shape)


def _fullest(updated: BoolArray, window: int) -> IntArray:
    """Most updates in any window of each lane, shape (L,)."""
    total = np.vstack([np.zeros((1, updated.shape[1]), dtype=np.int64), np.cumsum(updated, axis=0)])
    reach = min(window, len(updated))
    return np.asarray((total[reach:] - total[:-reach]).max(axis=0))
