"""From a record to the model of its loop: controller, likely plants, and how far they may be trusted."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from auditor.arrays import FloatArray
from auditor.controllers.pid import Pid
from auditor.errors import CannotAnswerError, Problem
from auditor.identify.alignment import shift_actuator
from auditor.identify.causes import likely_causes
from auditor.identify.controller import Recovery, recover_controller
from auditor.identify.ensemble import Ensemble, estimate
from auditor.identify.experiment import suggest
from auditor.identify.plant import Model
from auditor.identify.residual import choose_anti_windup, controller_residual, explained_by_error, null_replay
from auditor.identify.thresholds import NULL_GOOD, OWN_LAW
from auditor.identify.trust import Evidence, judge
from auditor.identify.validate import explained_percent, held_out_percent, setpoint_moves
from auditor.logs.fitness import require_usable
from auditor.logs.record import Record
from auditor.logs.spans import bridge
from auditor.loop import Loop
from auditor.progress import Progress, silent
from auditor.text import percent

MOVES_NEEDED = 2
"""Setpoint moves from which a log counts as excited."""

BRIDGED_SHARE = 0.1
"""Holes up to this share of tau_cl are bridged by holding (method, §1)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class _Return:
    """How well the record comes back."""

    null: float
    injected: bool
    explained: float
    causes: tuple[str, ...]


def identify(
    record: Record,
    loop: Loop,
    *,
    seed: int = 1,
    quick: bool = False,
    workers: int = 2,
    progress: Progress = silent,
) -> Model:
    """Identify the loop that made a record.

    Raises
    ------
    CannotAnswerError
        The log does not carry enough to identify the loop; the error names the test that failed and the experiment
        that would help.
    """
    require_usable(record)
    progress("recovering the controller", 0.0)
    recovery = recover_controller(record, loop)
    if not recovery.usable:
        raise CannotAnswerError(recovery.refusal or Problem(what="the controller cannot be recovered from the log"))
    if recovery.own_law:
        raise CannotAnswerError(_own_law(record, loop, recovery))
    aligned = shift_actuator(record, recovery.skew_samples)
    ensemble = estimate(
        aligned, recovery.controller, plant=loop.plant, seed=seed, quick=quick, workers=workers, progress=progress
    )
    progress("checking the model", 0.0)
    best = ensemble.plants[ensemble.best]
    controller = recovery.controller
    if loop.controller is None or loop.controller.anti_windup is None:
        warm_up = _warm_up(ensemble, record)
        controller = choose_anti_windup(aligned, controller, best, warm_up=warm_up)
    returned = _return(aligned, controller, ensemble)
    model = _model(aligned, loop, recovery, replace_gap(controller, loop), ensemble, returned, seed=seed, quick=quick)
    progress("checking the model", 1.0)
    return model


def replace_gap(controller: Pid, loop: Loop) -> Pid:
    """Bridge silences as the owner states; the log cannot tell."""
    stated = loop.controller.gap_integral if loop.controller is not None else "held"
    return replace(controller, gap_integral=stated)


def _own_law(record: Record, loop: Loop, recovery: Recovery) -> Problem:
    exact = recovery.relative_residual < OWN_LAW
    found = "any plant explains such a record; a fit with no dead time would return the controller's inverse"
    rest = percent(recovery.relative_residual, 1)
    noisy = (
        f"all but {rest} of the actuator is one static function of the measurement, and the rest is noise: it may be "
        "the controller's law, or a measurement that follows its actuator at once"
    )
    return Problem(
        what="the log holds only the controller's own law: the actuator is a fixed function of the measurement",
        where=f"actuator '{loop.signals.actuator.column}' against measurement '{loop.signals.measurement.column}'",
        found=found if exact else noisy,
        expected="a log in which the setpoint moves, or the actuator moves without the controller",
        do=suggest(record, loop),
    )


def _warm_up(ensemble: Ensemble, record: Record) -> int:
    """Samples after which a replay has forgotten how its span began."""
    return round(10.0 * ensemble.tau_cl_s / record.period)


def _return(record: Record, controller: Pid, ensemble: Ensemble) -> _Return:
    best = ensemble.plants[ensemble.best]
    null = null_replay(record, controller, best, warm_up=_warm_up(ensemble, record))
    rho = controller_residual(record, controller).rho
    rounded = record.u_quantum is not None
    return _Return(
        null=null,
        # Injected on a rounded or compressed actuator, rho would carry the rounding into the counts.
        injected=null > NULL_GOOD and not rounded,
        explained=explained_by_error(rho, record),
        causes=likely_causes(record, controller, best, null),
    )


def _model(
    record: Record,
    loop: Loop,
    recovery: Recovery,
    controller: Pid,
    ensemble: Ensemble,
    returned: _Return,
    *,
    seed: int,
    quick: bool,
) -> Model:
    pure = setpoint_moves(record) < MOVES_NEEDED
    evidence = Evidence(
        record=record,
        controller=controller,
        plants=ensemble.plants,
        best=ensemble.best,
        null_replay=returned.null,
        explained_by_error=returned.explained,
        causes=returned.causes,
        peak_sensitivity=ensemble.peak_sensitivity,
        pure_regulation=pure,
        dropped=ensemble.dropped,
    )
    trust, reasons = judge(evidence)
    return Model(
        plants=ensemble.plants,
        best=ensemble.best,
        controller=controller,
        controller_source=recovery.source,
        skew_samples=recovery.skew_samples,
        null_replay=returned.null,
        injected=returned.injected,
        explained_by_error=returned.explained,
        period=record.period,
        tau_cl_s=ensemble.tau_cl_s,
        peak_sensitivity=ensemble.peak_sensitivity,
        modes=ensemble.modes,
        dropped=ensemble.dropped,
        explained_percent=explained_percent(ensemble.plants[ensemble.best], record),
        explained_held_out_percent=None if quick else held_out_percent(record, controller, plant=loop.plant, seed=seed),
        pure_regulation=pure,
        trust=trust,
        reasons=(*reasons, *recovery.reasons),
        seed=seed,
        quick=quick,
    )


def aligned_record(record: Record, model: Model) -> Record:
    """The record a replay runs on: actuator shifted to where it acts, short holes bridged for this loop's speed."""
    return bridge(shift_actuator(record, model.skew_samples), BRIDGED_SHARE * model.tau_cl_s)


def injected_residual(record: Record, model: Model) -> FloatArray:
    """What is added to every replayed command, shape (N,) [actuator unit]: zero when nothing is injected.

    Parameters
    ----------
    record : Record
        From `aligned_record`.
    """
    if not model.injected:
        return np.zeros(len(record))
    return np.nan_to_num(controller_residual(record, model.controller).rho)
