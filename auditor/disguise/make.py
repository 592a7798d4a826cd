"""`disguise`: a copy that is held against the original before anyone sees it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np
import numpy.typing as npt

from auditor.disguise.draw import draw_key
from auditor.disguise.hide import hidden_log, hidden_loop
from auditor.disguise.key import Key
from auditor.errors import CannotAnswerError, OutputError, Problem
from auditor.identify.identify import aligned_record, identify
from auditor.logs.align import align
from auditor.logs.log import Log
from auditor.logs.reader import read_log
from auditor.logs.record import Record
from auditor.loop import Loop, RuleRequest
from auditor.panel import make_settings
from auditor.progress import Progress, silent
from auditor.replay.types import Setting

TRIES = 8
"""Keys that are drawn before giving up; the last half of them without an offset."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Disguised:
    """A copy that may be shared, and the key that undoes it.

    Attributes
    ----------
    loop : Loop
    log : Log
    key : Key
        Stays with the owner.
    panel : bool
        True when the original names no rules and the copy names the standard panel's.
    """

    loop: Loop
    log: Log
    key: Key
    panel: bool


def disguise(
    loop: Loop, *, seed: int | None = None, model_seed: int = 1, jobs: int = 2, progress: Progress = silent
) -> Disguised:
    """Make a copy of a loop whose replays update at the same samples.

    Parameters
    ----------
    loop : Loop
    seed : int, optional
        Draws the key; the same seed gives the same copy. Left out, nobody can draw it again.
    model_seed : int
        Seed of the identification that scales the standard panel; used only when the loop file names no rules.

    Raises
    ------
    LogError
        The log cannot be used.
    RuleError
        A rule asked for is unknown, or a setting of it has a unit that cannot be converted.
    OutputError
        No copy reads back as the original (a number of the log stands at an edge of what can be told from noise).
    """
    progress("reading the log", 0.0)
    log = read_log(loop)
    record = align(log, loop)
    progress("reading the log", 1.0)
    stated = loop
    if not loop.rules:
        stated = replace(loop, rules=panel_requests(record, loop, seed=model_seed, jobs=jobs, progress=progress))
    rng = np.random.default_rng(seed)
    for attempt in range(TRIES):
        key = draw_key(stated, log, record, rng, offset=attempt < TRIES // 2)
        copied = hidden_log(log, stated, key)
        copy = hidden_loop(stated, record, key, long=bool(log.own))
        if not differences(record, align(copied, copy), key):
            return Disguised(loop=copy, log=copied, key=key, panel=bool(stated.rules) and not loop.rules)
    raise OutputError(_no_copy(differences(record, align(copied, copy), key)))


def panel_requests(
    record: Record, loop: Loop, *, seed: int, jobs: int = 2, progress: Progress = silent
) -> tuple[RuleRequest, ...]:
    """The standard panel as `[[rules]]`: thresholds of a panel are rounded to decimal digits, which no scale keeps."""
    try:
        model = identify(record, loop, seed=seed, workers=jobs, progress=progress)
    except CannotAnswerError:
        return ()
    settings = make_settings(loop, aligned_record(record, model), model.controller, model.tau_cl_s)
    return tuple(_request(setting) for setting in settings)


def _request(setting: Setting) -> RuleRequest:
    values = {name: (value,) for name, value in setting.values.items()}
    return RuleRequest(rule=setting.rule, link=setting.link, settings=MappingProxyType(values))


def differences(record: Record, copy: Record, key: Key) -> list[str]:
    """Name what a copy's record does not share with the original's, digit for digit."""
    a, b = key.measurement_exponent, key.actuator_exponent
    w = [np.ldexp(row, e) for row, e in zip(record.w, key.disturbance_exponents, strict=True)]
    pairs: dict[str, tuple[npt.ArrayLike, npt.ArrayLike]] = {
        "times": ([record.start + key.time_shift_ns, record.period, record.log_step],
                  [copy.start, copy.period, copy.log_step]),
        "measurement": (key.hide_measurement(record.y), copy.y),
        "setpoint": (key.hide_measurement(record.r), copy.r),
        "error": (np.ldexp(record.e, a), copy.e),
        "actuator": (np.ldexp(record.u, b), copy.u),
        "disturbances": (np.ravel(w), np.ravel(copy.w)),
        "usable samples": (record.valid, copy.valid),
        "causes": (_causes(record), _causes(copy)),
        "spans": (_edges(record), _edges(copy)),
        "stored steps": (_steps(record, a, b), _steps(copy, 0, 0)),
        "actuator limits": (np.ldexp([record.low, record.high, record.max_rate], b),
                            [copy.low, copy.high, copy.max_rate]),
    }  # fmt: skip
    return [name for name, (one, other) in pairs.items() if not _same(one, other)]


def _causes(record: Record) -> npt.ArrayLike:
    return record.valid if record.cause is None else record.cause


def _edges(record: Record) -> list[int]:
    return [edge for span in record.spans for edge in (span.start, span.stop)]


def _steps(record: Record, a: int, b: int) -> list[float]:
    steps = ((record.y_quantum, a), (record.r_quantum, a), (record.y_deadband, a), (record.u_quantum, b))
    return [np.nan if step is None else float(np.ldexp(step, exponent)) for step, exponent in steps]


def _same(one: npt.ArrayLike, other: npt.ArrayLike) -> bool:
    first, second = np.asarray(one), np.asarray(other)
    return bool(np.array_equal(first, second, equal_nan=first.dtype.kind == "f"))


def _no_copy(what: Sequence[str]) -> Problem:
    return Problem(
        what="no copy of this log reads back as the original",
        found=f"{', '.join(what)} would differ",
        expected="the same record but for its scale",
        do="state resolution and range of every signal, so that nothing is left to be found by looking",
    )
