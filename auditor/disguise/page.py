"""A `Loop` as the text of a loop file."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields
from typing import Any

import numpy as np

from auditor.disguise.toml import table
from auditor.loop import Actuator, ControllerSettings, LogSource, Loop, RuleRequest, Signal

_GUARDS = {"min_gap_s": "min_gap", "max_silence_s": "max_silence"}


def loop_text(loop: Loop) -> str:
    """Write the loop file that reads back as `loop`; numbers keep every digit."""
    parts = [
        table("[loop]", {"name": loop.name, "period": loop.period, "plant": loop.plant}),
        table("[log]", _log(loop.log)),
        table("[signals]", _signals(loop)),
    ]
    if loop.controller is not None:
        parts.append(table("[controller]", _controller(loop.controller)))
    parts += [table("[limits]", _plain(loop.limits)), table("[accept]", _plain(loop.accept))]
    if loop.channel is not None:
        parts.append(table("[channel]", _plain(loop.channel)))
    if "failsafe" in loop.extras:
        failsafe = loop.extras["failsafe"]
        parts.append(table("[failsafe]", {"after": failsafe["after_s"], "action": failsafe["action"]}))
    parts += [table("[[rules]]", _rule(request)) for request in loop.rules]
    return "\n\n".join(parts) + "\n"


def _plain(part: Any) -> dict[str, Any]:
    """The fields of a frozen part whose names are the keys of its table."""
    return {field.name: getattr(part, field.name) for field in fields(part)}


def _log(log: LogSource) -> dict[str, Any]:
    cuts = [{"from": instant(e.start), "to": instant(e.end), "why": e.why} for e in log.exclude]
    layout = {"layout": log.layout, "time": log.time, "tag": log.tag, "value": log.value}
    dress = {"delimiter": log.delimiter, "decimal": log.decimal, "encoding": log.encoding}
    return {"path": log.paths[0], **layout, **dress, "exclude": cuts or None}


def instant(ns: int) -> str:
    """Write a time [ns since 1970 UTC] as RFC 3339, to the microsecond."""
    return f"{np.datetime64(int(ns), 'ns').astype('datetime64[us]')}Z"


def _signals(loop: Loop) -> dict[str, Any]:
    signals = loop.signals
    mode = signals.mode
    return {
        "measurement": _signal(signals.measurement),
        "setpoint": _signal(signals.setpoint),
        "actuator": _signal(signals.actuator),
        "disturbances": [_signal(signal) for signal in signals.disturbances] or None,
        "mode": {"column": mode.column, "automatic": list(mode.automatic)} if mode is not None else None,
    }


def _signal(signal: Signal) -> dict[str, Any]:
    body: dict[str, Any] = {"column": signal.column, "value": signal.value, "unit": signal.unit}
    if isinstance(signal, Actuator):
        body |= {"low": signal.low, "high": signal.high, "max_rate": signal.max_rate}
    elif signal.low is not None:
        body["range"] = [signal.low, signal.high]
    body |= {"resolution": signal.resolution, "stored": signal.stored}
    return {name: value for name, value in body.items() if value is not None}


def _controller(c: ControllerSettings) -> dict[str, Any]:
    body = _plain(c)
    return body | {"form": "ideal", "integral_time": "none" if c.integral_time is None else c.integral_time}


def _rule(request: RuleRequest) -> Mapping[str, Any]:
    choices = {name: getattr(request, name) for name in ("rule", "link", "signal", "between")}
    return choices | {_GUARDS.get(name, name): list(values) for name, values in request.settings.items()}
