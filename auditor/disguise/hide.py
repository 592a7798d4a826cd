"""A loop and its log under a key: `Loop` and `Log` of the copy."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, read_only
from auditor.disguise.key import Key
from auditor.errors import Problem, RuleError
from auditor.logs.findings.sentinel import sentinel_mask
from auditor.logs.fitness import roles_of
from auditor.logs.log import Log
from auditor.logs.modes import is_automatic
from auditor.logs.order import Order, put_in_order
from auditor.logs.record import Record
from auditor.loop import Actuator, ControllerSettings, Exclusion, LogSource, Loop, Mode, RuleRequest, Signal, Signals
from auditor.rules import Rule, get_rule

NAME = "loop-1"
UNIT = "scaled"
AUTOMATIC, OTHER = "AUTO", "MANUAL"
NO_VALUE = "bad"
"""Stands in a cell whose number stood for "no value", and for any text in a number column."""

_LARGEST = 1e100
_WATCH_MEASUREMENT = {("error-area", "area"), ("model-prediction", "delta")}
"""Settings that hold against the measurement whatever the link; the others hold against what is sent over it."""


def hidden_loop(loop: Loop, record: Record, key: Key, *, long: bool = False) -> Loop:
    """Return the loop of the copy.

    Parameters
    ----------
    record : Record
        Tells the steps its values are stored with.
    long : bool
        True when columns have rows of their own: the copy then has one row per time and tag.
    """
    a = key.measurement_exponent
    limits, accept = loop.limits, loop.accept
    return replace(
        loop,
        name=NAME,
        description="",
        log=_source(loop, key, long=long),
        signals=_signals(loop, record, key),
        controller=_controller(loop.controller, key) if loop.controller is not None else None,
        limits=replace(
            limits, low=_level(limits.low, key), high=_level(limits.high, key), band=_scaled(limits.band, a)
        ),
        accept=replace(accept, max_rms_error=_scaled(accept.max_rms_error, a)),
        approval=MappingProxyType({}),
        extras=_extras(loop, key),
        rules=tuple(_rule(request, key) for request in loop.rules),
        path=None,
    )


def _scaled(value: float | None, exponent: int) -> float | None:
    return None if value is None else math.ldexp(value, exponent)


def _level(value: float | None, key: Key) -> float | None:
    return None if value is None else math.ldexp(value, key.measurement_exponent) + key.measurement_offset


def _source(loop: Loop, key: Key, *, long: bool) -> LogSource:
    cuts = tuple(
        Exclusion(start=e.start + key.time_shift_ns, end=e.end + key.time_shift_ns, why="excluded by the owner")
        for e in loop.log.exclude
    )
    return LogSource(
        paths=(f"{NAME}.csv",),
        folder=Path(),
        layout="long" if long else "wide",
        tag="tag" if long else None,
        value="value" if long else None,
        time="time",
        delimiter=",",
        decimal=".",
        encoding="utf-8",
        exclude=cuts,
    )


def _signals(loop: Loop, record: Record, key: Key) -> Signals:
    own, b = loop.signals, key.actuator_exponent
    actuator = own.actuator
    steps = {"measurement": record.y_quantum, "setpoint": record.r_quantum, "actuator": record.u_quantum}
    level = {name: _level_signal(getattr(own, name), name, steps[name], key) for name in ("measurement", "setpoint")}
    return Signals(
        **level,
        actuator=Actuator(
            column="actuator",
            unit=UNIT,
            low=_scaled(actuator.low, b),
            high=_scaled(actuator.high, b),
            max_rate=_scaled(actuator.max_rate, b),
            resolution=_scaled(steps["actuator"], b),
            stored=actuator.stored,
        ),
        disturbances=tuple(
            _scaled_signal(signal, f"disturbance_{n + 1}", key.disturbance_exponents[n])
            for n, signal in enumerate(own.disturbances)
        ),
        mode=Mode(column="mode", automatic=(AUTOMATIC,)) if own.mode is not None else None,
    )


def _level_signal(signal: Signal, name: str, step: float | None, key: Key) -> Signal:
    """A signal that carries the offset; its step is stated, for a step found again is rounded to decimal digits."""
    constant = signal.column is None
    return Signal(
        column=None if constant else name,
        value=_level(signal.value, key),
        unit=UNIT,
        low=_level(signal.low, key),
        high=_level(signal.high, key),
        resolution=None if constant else _scaled(step, key.measurement_exponent),
        stored=signal.stored,
    )


def _scaled_signal(signal: Signal, name: str, exponent: int) -> Signal:
    low, high = _scaled(signal.low, exponent), _scaled(signal.high, exponent)
    step = _scaled(signal.resolution, exponent)
    return Signal(column=name, unit=UNIT, low=low, high=high, resolution=step, stored=signal.stored)


def _controller(own: ControllerSettings, key: Key) -> ControllerSettings:
    a, b = key.measurement_exponent, key.actuator_exponent
    return replace(
        own,
        form="ideal",
        gain=math.ldexp(own.gain, b - a),
        error_deadband=math.ldexp(own.error_deadband, a),
        bias=_scaled(own.bias, b),
    )


def _extras(loop: Loop, key: Key) -> Mapping[str, Mapping[str, Any]]:
    """Keep `[failsafe]`; `[energy]` tells which device it is, and no count depends on it."""
    if "failsafe" not in loop.extras:
        return MappingProxyType({})
    own = dict(loop.extras["failsafe"])
    if own["action"] != "hold":
        own["action"] = math.ldexp(own["action"], key.actuator_exponent)
    return MappingProxyType({"failsafe": MappingProxyType(own)})


def _rule(request: RuleRequest, key: Key) -> RuleRequest:
    rule = get_rule(request.rule)
    settings = {name: _setting(rule, request, name, values, key) for name, values in request.settings.items()}
    return replace(request, settings=MappingProxyType(settings))


def _setting(rule: Rule, request: RuleRequest, name: str, values: tuple[float, ...], key: Key) -> tuple[float, ...]:
    """Convert the values of one setting by its unit."""
    unit = next((spec.unit for spec in rule.settings if spec.name == name), "s")
    kind = unit.split("·")[0].split("/")[0]
    sent = (request.link or rule.link) == "actuator" and (rule.name, name) not in _WATCH_MEASUREMENT
    measured = key.actuator_exponent if sent else key.measurement_exponent
    exponents = {"measurement": measured, "command": key.actuator_exponent, "s": 0, "samples": 0, "": 0}
    if kind not in exponents:
        what = f"setting '{name}' of rule '{rule.name}' cannot be disguised"
        raise RuleError(Problem(what=what, found=f"unit {unit}", do="remove it from [[rules]]"))
    return tuple(math.ldexp(value, exponents[kind]) for value in values)


def hidden_log(log: Log, loop: Loop, key: Key) -> Log:
    """Return the log of the copy: engineering values, hidden; what stands for no value becomes a word."""
    measurement = loop.signals.measurement.column
    order = put_in_order(log.time, np.isfinite(log.channels[str(measurement)]))
    channels: dict[str, FloatArray] = {}
    texts: dict[str, npt.NDArray[Any]] = {}
    for name, role, signal, exponent in _columns(loop, key):
        values, words = _engineering(log, order, signal, role)
        offset = key.measurement_offset if role in ("measurement", "setpoint") else 0.0
        channels[name] = read_only(np.ldexp(values, exponent) + offset)
        if words.any():
            texts[name] = _spoken(words)
    mode = loop.signals.mode
    if mode is not None:
        texts["mode"] = _modes(log, mode)
    own = {name: log.own[column] for name, column in key.columns.items() if name != "time" and column in log.own}
    return Log(
        time=read_only(log.time + key.time_shift_ns),
        channels=MappingProxyType(channels),
        texts=MappingProxyType(texts),
        own=MappingProxyType(own),
        rows=log.rows,
    )


def _columns(loop: Loop, key: Key) -> list[tuple[str, str, Signal, int]]:
    """Neutral name, role, signal and exponent of every number column."""
    a, b = key.measurement_exponent, key.actuator_exponent
    found = [(role, role, signal, b if role == "actuator" else a) for role, signal in roles_of(loop).items()]
    for n, signal in enumerate(loop.signals.disturbances):
        found.append((f"disturbance_{n + 1}", "disturbance", signal, key.disturbance_exponents[n]))
    return [entry for entry in found if entry[2].column is not None]


def _engineering(log: Log, order: Order, signal: Signal, role: str) -> tuple[FloatArray, BoolArray]:
    """Engineering values of a column, and where a word or a number stood for "no value"; shapes (rows,)."""
    raw = log.channels[str(signal.column)]
    rows = slice(None) if order.rows is None else order.rows
    words = np.zeros(len(raw), dtype=np.bool_)
    words[rows] = sentinel_mask(raw[rows], role == "measurement" and signal.low is None and signal.high is None)
    if str(signal.column) in log.texts:
        words |= np.array([cell is not None for cell in log.texts[str(signal.column)]])
    values = np.where(words | ~(np.abs(raw) < _LARGEST), np.nan, raw)
    if signal.scale != 1.0 or signal.offset != 0.0:
        values = signal.scale * values + signal.offset
    return values, words


def _spoken(words: BoolArray) -> npt.NDArray[Any]:
    cells = np.full(len(words), None, dtype=object)
    cells[words] = NO_VALUE
    return cells


def _modes(log: Log, mode: Mode) -> npt.NDArray[Any]:
    cells = log.texts[mode.column] if mode.column in log.texts else log.channels[mode.column]
    names = {
        cell: "" if str(cell).strip() == "" else AUTOMATIC if is_automatic(cell, mode.automatic) else OTHER
        for cell in set(cells.tolist())
    }
    return np.array([names[cell] for cell in cells.tolist()], dtype=object)
