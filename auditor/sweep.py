"""Rules × settings × likely plants → one answer per setting."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Generic, TypeVar

import numpy as np

from auditor.arrays import FloatArray
from auditor.logs.record import Record, Span
from auditor.loop import Limits, Loop
from auditor.progress import Progress, silent
from auditor.replay.bench import Bench
from auditor.replay.counted import by_month, counted_spans, split
from auditor.replay.lanes import Lanes, diverged, replay_lanes
from auditor.replay.measuring import answer_interval, log_floor, middle, per_lane, totals
from auditor.replay.refusals import refusal, trust_of_width
from auditor.replay.types import Replay, Setting
from auditor.workers import run_each

_T = TypeVar("_T")

PARTS = ("whole", "first", "rest")
"""Parts of the counted time with their own measures: all, where a setting is chosen, where it is judged."""

INTERVALS = {"updates": "updates", "rms_error": "error", "iae_per_hour": "error", "max_abs_error": "error"}
"""Measures with an interval, and which floor of the log applies to each."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Parts:
    """Counted stretches: all, the part a setting is chosen on, the rest, and calendar months of long logs."""

    whole: tuple[Span, ...]
    first: tuple[Span, ...]
    rest: tuple[Span, ...]
    months: tuple[tuple[str, tuple[Span, ...]], ...]


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Outcome(Generic[_T]):
    """One setting's answer, what every draw did on each part, and what an inspector made of its lanes.

    Attributes
    ----------
    replay : Replay
    squares, counts : mapping of part name to ndarray, shape (draws,)
        Mean square error [unit²] and updates of every draw on "whole", "first" and "rest".
    """

    replay: Replay
    squares: dict[str, FloatArray]
    counts: dict[str, FloatArray]
    inspected: _T


def make_parts(record: Record, tau_cl_s: float, settings: Sequence[Setting]) -> Parts:
    """Cut the record into what is counted; the warm-up is the same for all settings."""
    longest = max((s.max_silence_s for s in settings if s.max_silence_s is not None), default=0.0)
    whole = counted_spans(record, tau_cl_s, longest)
    first, rest = split(whole)
    return Parts(whole=whole, first=first, rest=rest, months=by_month(record, whole))


def sweep(
    bench: Bench,
    loop: Loop,
    settings: Sequence[Setting],
    parts: Parts,
    inspect: Callable[[int, Setting, Lanes], _T],
    *,
    jobs: int = 2,
    progress: Progress = silent,
) -> list[Outcome[_T]]:
    """Replay every setting over every likely plant.

    Parameters
    ----------
    inspect : callable
        Called once per setting with (index, setting, lanes) while the replayed signals are in memory.
    jobs : int
        Threads; the result does not depend on it.
    """

    def one(index: int) -> Outcome[_T]:
        return answer(bench, loop, index, settings[index], parts, inspect)

    return run_each(one, range(len(settings)), jobs, "replaying rules", progress)


def answer(
    bench: Bench,
    loop: Loop,
    index: int,
    setting: Setting,
    parts: Parts,
    inspect: Callable[[int, Setting, Lanes], _T],
) -> Outcome[_T]:
    """Replay one setting and sum it up."""
    lanes = replay_lanes(bench, setting)
    measured = {name: _measure(bench, loop.limits, lanes, spans) for name, spans in _spans(parts)}
    whole = measured["whole"]
    unstable = diverged(lanes, bench)
    floor = log_floor(bench.record)
    intervals = {name: _intervals(setting, measured[name], bench.draws, floor) for name in PARTS}
    refused = refusal(setting, bench, whole, intervals["whole"], unstable[: bench.draws])
    replayed = Replay(
        setting=setting,
        measures=middle(whole, bench.draws),
        interval90=intervals["whole"],
        first=middle(measured["first"], bench.draws),
        rest=middle(measured["rest"], bench.draws),
        interval90_first=intervals["first"],
        interval90_rest=intervals["rest"],
        by_period=tuple((name, middle(measured[name], bench.draws)) for name, _ in parts.months),
        answerable=refused is None,
        refusal=refused,
        trust="none" if refused is not None else trust_of_width(whole, intervals["whole"], bench.draws),
        naive_updates=float(whole["updates"][bench.draws]),
        naive_rms_error=float(whole["rms_error"][bench.draws]),
        members={name: whole[name][: bench.draws].copy() for name in ("updates", "rms_error")},
        median_member=median_member(whole["updates"][: bench.draws]),
    )
    return Outcome(
        replay=replayed,
        squares={p: measured[p]["rms_error"][: bench.draws] ** 2 for p in PARTS},
        counts={p: measured[p]["updates"][: bench.draws].copy() for p in PARTS},
        inspected=inspect(index, setting, lanes),
    )


def _spans(parts: Parts) -> list[tuple[str, tuple[Span, ...]]]:
    return [*((name, getattr(parts, name)) for name in PARTS), *parts.months]


def _measure(bench: Bench, limits: Limits, lanes: Lanes, spans: Sequence[Span]) -> dict[str, FloatArray]:
    total = totals(lanes.y, lanes.u, lanes.updated, bench.record, bench.controller, limits, spans)
    return per_lane(total, bench.record, limits)


def _intervals(
    setting: Setting, lanes: dict[str, FloatArray], draws: int, floor: dict[str, float]
) -> dict[str, tuple[float, float]]:
    found = {name: answer_interval(lanes[name], draws, floor[kind]) for name, kind in INTERVALS.items()}
    if setting.rule == "periodic":
        # A clock's count does not depend on the plant, nor on how finely the log was stored.
        found["updates"] = (float(lanes["updates"][0]), float(lanes["updates"][0]))
    return found


def median_member(updates: FloatArray) -> int:
    """Index of the draw whose count is the median (the lower one of two), earliest among equals."""
    order = np.argsort(updates, kind="stable")
    middle_count = updates[order[(len(order) - 1) // 2]]
    return int(np.flatnonzero(updates == middle_count)[0])


def with_series(bench: Bench, replay: Replay) -> Replay:
    """Replay a setting once more and keep the signals of its median member."""
    lanes = replay_lanes(bench, replay.setting)
    return replace(replay, series=lanes.series(replay.median_member))
