"""Which rules at which settings: the loop file's own, or a standard panel scaled from the log."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from auditor.controllers.pid import Pid
from auditor.errors import Problem, RuleError, raise_all
from auditor.logs.record import Record
from auditor.loop import Loop, RuleRequest
from auditor.replay.lanes import guards
from auditor.replay.refusals import DEADBANDS, QUANTA
from auditor.replay.types import Setting
from auditor.rules import get_rule

STEPS = 9
"""Thresholds per rule of the standard panel."""

QUICK_STEPS = 4

LOWEST, HIGHEST = 0.15, 4.0
"""Thresholds of the panel in robust deviations of the error: from nearly every sample to nearly none."""

GUARDS = ("min_gap_s", "max_silence_s")


@dataclass(frozen=True, slots=True, kw_only=True)
class Scale:
    """What thresholds are scaled with: the error's robust deviation [unit], tau_cl [s], |K|, quantum floor [unit]."""

    error: float
    tau_cl_s: float
    gain: float
    floor: float


def scale_of(record: Record, controller: Pid, tau_cl_s: float) -> Scale:
    """Measure what thresholds are scaled with."""
    inside = record.e[record.in_span]
    low, high = np.quantile(inside, [0.16, 0.84])
    error = float(high - low) / 2 or float(np.std(inside))
    floor = max(QUANTA * (record.y_quantum or 0.0), DEADBANDS * (record.y_deadband or 0.0))
    return Scale(error=error, tau_cl_s=tau_cl_s, gain=abs(controller.gain), floor=floor)


def make_settings(
    loop: Loop, record: Record, controller: Pid, tau_cl_s: float, *, quick: bool = False
) -> list[Setting]:
    """Return the settings to replay: those of the loop file beside the slowed-down clock, or the standard panel.

    Raises
    ------
    RuleError
        A rule or a setting of the loop file is unknown or out of range; all of them are told at once.
    """
    if loop.rules:
        asked = requested(loop, record.period)
        # The slowed-down clock is what every rule is held against, so it is always replayed.
        clock = [] if any(s.rule == "periodic" for s in asked) else _clocks(loop, record, quick=quick)
        return [*asked, *clock]
    return standard(loop, record, scale_of(record, controller, tau_cl_s), QUICK_STEPS if quick else STEPS)


def requested(loop: Loop, period: float) -> list[Setting]:
    """Expand the loop file's `[[rules]]`: every list-valued setting is swept, all combinations."""
    settings: list[Setting] = []
    problems: list[Problem] = []
    for request in loop.rules:
        try:
            settings += expand(request, loop, period)
        except RuleError as error:
            problems += error.problems
    raise_all(RuleError, problems)
    return settings


def expand(request: RuleRequest, loop: Loop, period: float) -> list[Setting]:
    """Expand one `[[rules]]` table."""
    names = list(request.settings)
    rows = itertools.product(*(request.settings[name] for name in names))
    return [make_setting(request.rule, dict(zip(names, row, strict=True)), loop, period, request) for row in rows]


def make_setting(
    name: str, given: Mapping[str, float], loop: Loop, period: float, request: RuleRequest | None = None
) -> Setting:
    """Check one setting and complete it with the rule's defaults and the owner's longest silence.

    Raises
    ------
    RuleError
        The rule or a setting is unknown or out of range, has no use on the link, or `max_silence` is shorter than
        `min_gap`.
    """
    rule = get_rule(name)
    values = rule.complete({k: v for k, v in given.items() if k not in GUARDS})
    shown = {k: v for k, v in values.items() if k in given or (math.isfinite(v) and v != rule_default(name, k))}
    link = request.link if request and request.link else rule.link
    if link not in rule.links:
        raise RuleError(
            Problem(what=f"rule '{name}' has no link '{link}'", found=link, expected=" or ".join(rule.links))
        )
    raise_all(RuleError, _without_use(name, link, request))
    setting = Setting(
        rule=name,
        link=link,
        signal=(request.signal if request and request.signal else "error"),
        between=(request.between if request and request.between else "hold"),
        values=MappingProxyType(shown),
        min_gap_s=given.get("min_gap_s"),
        max_silence_s=given.get("max_silence_s", None if name == "periodic" else loop.limits.max_silence),
    )
    guards(setting, period)
    return setting


def _without_use(name: str, link: str, request: RuleRequest | None) -> list[Problem]:
    """On the actuator's link the rule watches the command and the controller runs at every sample."""
    if request is None or link != "actuator":
        return []
    asked = {"signal": request.signal, "between": request.between}
    return [
        Problem(
            what=f"{key} of rule '{name}' has no use on the actuator's link",
            found=f'{key} = "{value}"',
            expected="the command is watched, and the controller runs at every sample",
            do=f'remove {key}, or write link = "sensor"',
        )
        for key, value in asked.items()
        if value in ("measurement", "run")
    ]


def rule_default(rule: str, setting: str) -> float | None:
    """Default of one setting."""
    return next(spec.default for spec in get_rule(rule).settings if spec.name == setting)


def standard(loop: Loop, record: Record, scale: Scale, steps: int) -> list[Setting]:
    """The standard panel: the slowed-down clock and every rule at thresholds scaled from the log."""
    deltas = thresholds(scale, loop.limits.band, steps)
    asked: list[tuple[str, dict[str, float]]] = [("periodic", {"every": n}) for n in clock_divisors(record, loop)]
    for delta in deltas:
        area = delta * scale.tau_cl_s
        asked += [
            ("send-on-delta", {"delta": delta}),
            ("level-crossing", {"spacing": delta, "hysteresis": 0.1 * delta}),
            ("send-on-area", {"area": 0.5 * area}),
            ("error-area", {"area": area, "delta": 2.0 * delta}),
            ("linear-prediction", {"delta": delta, "window_s": max(record.period, 0.5 * scale.tau_cl_s)}),
            ("model-prediction", {"delta": delta}),
            ("actuator-deadband", {"delta": delta * scale.gain}),
        ]
    order = {name: i for i, name in enumerate(dict.fromkeys(name for name, _ in asked))}
    asked.sort(key=lambda item: order[item[0]])
    return [make_setting(name, values, loop, record.period) for name, values in asked]


def _clocks(loop: Loop, record: Record, *, quick: bool) -> list[Setting]:
    """The slowed-down clock at a few divisors."""
    every = clock_divisors(record, loop)
    return [make_setting("periodic", {"every": n}, loop, record.period) for n in (every[::2] if quick else every)]


def thresholds(scale: Scale, band: float | None, steps: int) -> list[float]:
    """Log-spaced thresholds, never below what the log's resolution can answer, rounded to three digits."""
    top = max(HIGHEST * scale.error, band or 0.0)
    low = max(LOWEST * scale.error, scale.floor)
    if low >= top:
        top = 4.0 * low
    return _rounded(np.geomspace(low, top, steps))


def clock_divisors(record: Record, loop: Loop) -> list[int]:
    """Divisors of the clock up to the owner's longest silence, or to 64."""
    longest = loop.limits.max_silence
    most = 64 if longest is None else max(2, min(256, int(longest / record.period)))
    return [n for n in (2, 3, 4, 5, 6, 8, 10, 12, 16, 20, 24, 32, 48, 64, 96, 128, 192, 256) if n <= most]


def _rounded(values: Iterable[float]) -> list[float]:
    # Rounded up, so that a threshold at the resolution's bound stays at or above it.
    out = []
    for value in values:
        unit = 10.0 ** (math.floor(math.log10(value)) - 2)
        out.append(float(f"{math.ceil(value / unit - 1e-9) * unit:.12g}"))
    return list(dict.fromkeys(out))


def one_setting(rule: str, given: Mapping[str, float], loop: Loop, link: str | None = None) -> Setting:
    """One setting as asked for on a command line.

    Raises
    ------
    RuleError
        The rule, a setting or the link is unknown or out of range.
    """
    return make_setting(rule, given, loop, loop.period, RuleRequest(rule=rule, link=link))
