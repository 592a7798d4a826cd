"""The rooms of an audit in order, as steps that can also be taken one by one."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from auditor.dangers import find_flags
from auditor.dangers.base import Case as DangerCase
from auditor.dangers.interval import Flag
from auditor.errors import CannotAnswerError, Problem
from auditor.identify.identify import aligned_record, injected_residual
from auditor.identify.plant import Model
from auditor.logs.record import Record
from auditor.loop import Actuator, LogSource, Loop, Signal, Signals
from auditor.panel import make_setting
from auditor.progress import Progress, silent
from auditor.replay.bench import Bench, make_bench
from auditor.replay.counted import samples
from auditor.replay.lanes import Lanes
from auditor.replay.types import Replay, Setting
from auditor.sweep import Outcome, Parts, make_parts, sweep, with_series
from auditor.text import duration
from auditor.tradeoff import ClockCurve, clock_curve, compare, divisors_for


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Replayed:
    """All replays of one record with their flags."""

    replays: tuple[Replay, ...]
    flags: tuple[Flag, ...]


def bench_of(record: Record, model: Model) -> Bench:
    """Lay out a record and its model for replays.

    Parameters
    ----------
    record : Record
        As read; the model's skew and bridges are applied here.
    """
    aligned = aligned_record(record, model)
    rho = injected_residual(aligned, model)
    return make_bench(aligned, model.controller, model.plants, model.best, model.tau_cl_s, rho)


def replay_all(
    bench: Bench, loop: Loop, model: Model, settings: Sequence[Setting], parts: Parts, *, jobs: int = 2,
    progress: Progress = silent,
) -> Replayed:  # fmt: skip
    """Replay every setting, look for danger, and compare each with the slowed-down clock."""

    def look(index: int, setting: Setting, lanes: Lanes) -> tuple[Flag, ...]:
        return find_flags(danger_case(bench, loop, model, parts, setting, lanes), index)

    outcomes = sweep(bench, loop, settings, parts, look, jobs=jobs, progress=progress)
    curves = _curves(bench, loop, parts, outcomes, jobs, progress)
    return Replayed(
        replays=tuple(_compared(outcome, curves, model.trust) for outcome in outcomes),
        flags=tuple(flag for outcome in outcomes for flag in outcome.inspected),
    )


def danger_case(bench: Bench, loop: Loop, model: Model, parts: Parts, setting: Setting, lanes: Lanes) -> DangerCase:
    """What the detectors look at: the likely plants only, on counted samples."""
    return DangerCase(
        record=bench.record,
        loop=loop,
        model=model,
        counted=parts.whole,
        setting=setting,
        y=lanes.y[:, : lanes.draws],
        u=lanes.u[:, : lanes.draws],
        updated=lanes.updated[:, : lanes.draws] == 1,
    )


def _curves(
    bench: Bench, loop: Loop, parts: Parts, outcomes: Sequence[Outcome[tuple[Flag, ...]]], jobs: int, progress: Progress
) -> dict[tuple[str, str], ClockCurve]:
    """The clock on every link and way of running that a setting uses: a rule is held against its own kind."""
    slowest: dict[tuple[str, str], float] = {}
    for outcome in outcomes:
        kind = _kind(outcome.replay)
        slowest[kind] = max(slowest.get(kind, 2.0), _slowness(outcome, parts))
    return {
        (link, between): clock_curve(
            bench,
            loop,
            parts,
            divisors_for(1.0, math.ceil(ratio)),
            link=link,
            between=between,
            jobs=jobs,
            progress=progress,
        )
        for (link, between), ratio in slowest.items()
    }


def _kind(replay: Replay) -> tuple[str, str]:
    return replay.setting.link, replay.setting.between


def _slowness(outcome: Outcome[tuple[Flag, ...]], parts: Parts) -> float:
    """Samples per update on the part where the setting updates least; 1 for a setting that is not answered."""
    if not outcome.replay.answerable:
        return 1.0
    spans = {"whole": parts.whole, "first": parts.first, "rest": parts.rest}
    return max(samples(spans[p]) / max(1.0, float(np.min(outcome.counts[p]))) for p in outcome.counts)


def _compared(
    outcome: Outcome[tuple[Flag, ...]], curves: dict[tuple[str, str], ClockCurve], model_trust: str
) -> Replay:
    trusted = replace(outcome.replay, trust=_least(outcome.replay.trust, model_trust))
    if trusted.setting.rule == "periodic":
        return trusted  # one phase of the clock against the mean of its phases would say nothing
    curve = curves[_kind(trusted)]
    found = {part: compare(curve, part, outcome.counts[part], outcome.squares[part]) for part in outcome.counts}
    whole = found["whole"]
    return replace(
        trusted,
        against_periodic=whole.outcome,
        periodic_rms_error=whole.clock_rms,
        rms_difference90=whole.difference90,
        against_periodic_first=found["first"].outcome,
        against_periodic_rest=found["rest"].outcome,
    )


def _least(*levels: str) -> str:
    """No answer can be trusted further than the model it rests on."""
    return min(levels, key=("none", "limited", "good").index)


def replay(record: Record, model: Model, rule: str, *, loop: Loop | None = None, **settings: float) -> Replay:
    """Replay one rule at one setting, with the signals of the median member.

    Parameters
    ----------
    record : Record
        As read.
    model : Model
    rule : str
        A name of `auditor rules`.
    loop : Loop, optional
        Limits and guards the replay is held against; none when left out.
    **settings : float
        The rule's own settings; `min_gap_s`, `max_silence_s` are guards [s].

    Raises
    ------
    RuleError
        The rule or a setting is unknown or out of range.
    """
    held_against = loop if loop is not None else _without_limits(record.period)
    setting = make_setting(rule, settings, held_against, record.period)
    return replay_setting(record, model, held_against, setting)[0]


def _without_limits(period: float) -> Loop:
    """A loop of which nothing but the period is stated."""
    nothing = Signals(measurement=Signal(), setpoint=Signal(), actuator=Actuator())
    return Loop(name="loop", period=period, log=LogSource(paths=(), folder=Path()), signals=nothing)


def replay_setting(
    record: Record, model: Model, loop: Loop, setting: Setting, *, jobs: int = 2, progress: Progress = silent
) -> tuple[Replay, tuple[Flag, ...]]:
    """Replay one setting; return its answer with the signals of the median member, and its flags.

    Raises
    ------
    CannotAnswerError
        No span of the record is longer than twice its warm-up.
    """
    bench = bench_of(record, model)
    parts = make_parts(bench.record, model.tau_cl_s, [setting])
    if not parts.whole:
        raise CannotAnswerError(all_warm_up(bench.record, model))
    done = replay_all(bench, loop, model, [setting], parts, jobs=jobs, progress=progress)
    return with_series(bench, done.replays[0]), done.flags


def all_warm_up(record: Record, model: Model) -> Problem:
    """What to tell when nothing can be counted."""
    longest = max((len(s) for s in record.spans), default=0) * record.period
    return Problem(
        what="no span of the log is long enough to be counted",
        found=f"the longest span is {duration(longest)}",
        expected=f"twice the warm-up: ten closed-loop time constants ({duration(10 * model.tau_cl_s)}) or the longest "
        "silence",
        do="give a log with a longer stretch in automatic operation, or state a shorter max_silence",
    )
