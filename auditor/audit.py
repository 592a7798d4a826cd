"""The whole job: the rooms in order, nothing else."""

from __future__ import annotations

import importlib.metadata
import platform
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime

from auditor.controllers.pid import Pid
from auditor.dangers.interval import Flag
from auditor.errors import CannotAnswerError
from auditor.identify.experiment import suggest
from auditor.identify.identify import identify
from auditor.identify.plant import Model
from auditor.job import Replayed, all_warm_up, bench_of, replay_all
from auditor.logs.align import read_record
from auditor.logs.record import Record, Span
from auditor.loop import Loop
from auditor.objections import Case
from auditor.panel import make_settings, requested
from auditor.progress import Progress, silent
from auditor.replay.bench import Bench
from auditor.replay.counted import split
from auditor.replay.measuring import baseline
from auditor.replay.types import Measures, Replay
from auditor.sweep import Parts, make_parts, with_series
from auditor.verdict import CAUTIONS, Recommendation, Verdict, decide, recommend
from auditor.version import VERSION

PACKAGES = ("numpy", "scipy", "pandas", "pyarrow", "numba", "matplotlib", "pydantic", "jinja2", "typer")

SHOWN_DANGERS = 12
"""Replays with a danger flag whose signals are kept for the report, those with the fewest updates first."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Provenance:
    """What is needed to run the same audit again."""

    auditor_version: str
    packages: Mapping[str, str]
    seed: int
    created: str
    command: str


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Audit:
    """Everything an audit found.

    Attributes
    ----------
    model : Model or None
        None when the log carries no loop to identify (then there are no replays and the verdict is "undecided").
    baseline : Measures or None
        The record itself; `baseline_first`, `baseline_rest` on the two parts.
    counted : tuple of Span
        Spans less warm-up: what every measure covers.
    """

    loop: Loop
    record: Record
    model: Model | None
    counted: tuple[Span, ...]
    baseline: Measures | None
    baseline_first: Measures | None
    baseline_rest: Measures | None
    replays: tuple[Replay, ...]
    flags: tuple[Flag, ...]
    recommendation: Recommendation
    verdict: Verdict
    provenance: Provenance

    @property
    def answerable(self) -> bool:
        """False when the log was read but does not carry enough to answer anything."""
        return self.model is not None and self.model.trust != "none" and bool(self.replays)


def audit(
    loop: Loop,
    *,
    record: Record | None = None,
    model: Model | None = None,
    seed: int = 1,
    quick: bool = False,
    jobs: int = 2,
    command: str = "",
    progress: Progress = silent,
) -> Audit:
    """Do the whole job for one loop.

    Parameters
    ----------
    record, model : optional
        Already read or identified; found from the loop when left out.
    seed : int
        Same input and same seed give the same result, bit for bit. A given model brings its own.
    quick : bool
        Half the draws and a coarser panel.
    jobs : int
        Threads; the result does not depend on it.

    Raises
    ------
    LoopFileError, LogError, RuleError
        The loop file or the log cannot be used. A log that was read but cannot answer is not an error: the audit
        then says "undecided" with the test that failed.
    """
    if loop.rules:
        requested(loop, loop.period)  # a wrong rule is told before anything is computed
    if record is None:
        progress("reading the log", 0.0)
        record = read_record(loop)
    provenance = _provenance(seed if model is None else model.seed, command)
    try:
        model = model or identify(record, loop, seed=seed, quick=quick, workers=jobs, progress=progress)
    except CannotAnswerError as error:
        return _without_model(loop, record, error, provenance)
    bench = bench_of(record, model)
    settings = make_settings(loop, bench.record, model.controller, model.tau_cl_s, quick=quick)
    parts = make_parts(bench.record, model.tau_cl_s, settings)
    if not parts.whole:
        return _without_counted(loop, bench.record, model, provenance)
    replayed = replay_all(bench, loop, model, settings, parts, jobs=jobs, progress=progress)
    return _decided(loop, bench, model, parts, replayed, provenance)


def _decided(loop: Loop, bench: Bench, model: Model, parts: Parts, replayed: Replayed, provenance: Provenance) -> Audit:
    record, controller = bench.record, model.controller
    base, first, rest = (baseline(record, controller, loop.limits, s) for s in (parts.whole, parts.first, parts.rest))
    case = Case(
        loop=loop,
        model=model,
        baseline=base,
        replays=replayed.replays,
        flags=replayed.flags,
        first=parts.first,
        rest=parts.rest,
        experiment=suggest(record, loop, model.tau_cl_s),
    )
    recommendation = recommend(case)
    shown = _shown(recommendation, replayed)
    return Audit(
        loop=loop,
        record=record,
        model=model,
        counted=parts.whole,
        baseline=base,
        baseline_first=first,
        baseline_rest=rest,
        replays=tuple(with_series(bench, r) if i in shown else r for i, r in enumerate(replayed.replays)),
        flags=replayed.flags,
        recommendation=recommendation,
        verdict=decide(case, recommendation),
        provenance=provenance,
    )


def _shown(recommendation: Recommendation, replayed: Replayed) -> set[int]:
    """Replays whose signals the report shows: the recommended one, and some with danger flags."""
    dangerous = sorted(
        {f.replay for f in replayed.flags if f.severity == "danger" and replayed.replays[f.replay].answerable},
        key=lambda i: (replayed.replays[i].measures.updates, i),
    )
    chosen = [i for i in (recommendation.replay, recommendation.nearest) if i is not None]
    return {*chosen, *dangerous[:SHOWN_DANGERS]}


def _without_model(
    loop: Loop, record: Record, error: CannotAnswerError, provenance: Provenance, tau_cl_s: float | None = None
) -> Audit:
    """The complete report of a log that was read but carries no loop to identify."""
    controller_limits = _bare_controller(record)
    spans = record.spans
    first, rest = split(spans)
    measured = [baseline(record, controller_limits, loop.limits, s) if s else None for s in (spans, first, rest)]
    return Audit(
        loop=loop,
        record=record,
        model=None,
        counted=spans,
        baseline=measured[0],
        baseline_first=measured[1],
        baseline_rest=measured[2],
        replays=(),
        flags=(),
        recommendation=Recommendation(replay=None, reasons=("No rule was replayed: there is no model of the loop.",)),
        verdict=_undecided(tuple(p.sentence() for p in error.problems), suggest(record, loop, tau_cl_s)),
        provenance=provenance,
    )


def _without_counted(loop: Loop, record: Record, model: Model, provenance: Provenance) -> Audit:
    """The complete report of a log whose every span is mostly warm-up."""
    error = CannotAnswerError(all_warm_up(record, model))
    return replace(_without_model(loop, record, error, provenance, model.tau_cl_s), model=model)


def _undecided(reasons: Sequence[str], experiment: str) -> Verdict:
    told = tuple(reasons) if any("What would settle" in r for r in reasons) else (*reasons, experiment)
    return Verdict(decision="undecided", reasons=told, cautions=CAUTIONS)


def _bare_controller(record: Record) -> Pid:
    return Pid(gain=0.0, low=record.low, high=record.high, max_rate=record.max_rate)


def _provenance(seed: int, command: str) -> Provenance:
    packages = {"python": platform.python_version()}
    packages.update({name: importlib.metadata.version(name) for name in PACKAGES})
    return Provenance(
        auditor_version=VERSION,
        packages=packages,
        seed=seed,
        created=datetime.now(UTC).isoformat(timespec="seconds").replace("+00:00", "Z"),
        command=command,
    )
