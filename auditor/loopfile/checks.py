"""What must hold between two keys of a loop file; each check looks at tables that are valid by themselves."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from auditor.loopfile.faults import Fault, as_written, in_words
from auditor.loopfile.gains import actuator_span
from auditor.loopfile.lines import KeyPath
from auditor.loopfile.schema import (
    ActuatorTable,
    ChannelTable,
    ControllerTable,
    LimitsTable,
    LogTable,
    ModeTable,
    SetpointTable,
    SignalsTable,
    SignalTable,
)


def check_log(log: LogTable) -> Iterator[Fault]:
    """Check `[log]`: tags only in the long layout, delimiter against decimal sign, the codes of quality."""
    for key in ("tag", "value"):
        if log.layout == "wide" and key in log.model_fields_set:
            do = f'write layout = "long", or remove {key}'
            layout = ("log", "layout")
            yield _fault(("log", key), "is for the long layout only", 'layout = "wide"', 'layout = "long"', do, layout)
    if log.decimal is not None and log.decimal == log.delimiter:
        at, other = ("log", "decimal"), ("log", "delimiter")
        yield _fault(at, "is also the delimiter", as_written(log.decimal), "two different signs", "correct one", other)
    for key, codes in (("good", log.good), ("stale", log.stale)):
        if codes and log.quality is None:
            at, other = ("log", key), ("log", "quality")
            do = f"add quality, or remove {key}"
            yield _fault(at, "needs a quality column", "no quality", "quality = a column", do, other)
    for code in log.good:
        if code in log.stale:
            at, other = ("log", "stale"), ("log", "good")
            expected = "a code that is either good or stale"
            yield _fault(at, "shares a code with good", as_written(code), expected, "remove it from one", other)


def check_signals(signals: SignalsTable) -> Iterator[Fault]:
    """Check `[signals]`: ranges, a setpoint that is a column or a constant, and no column in two roles."""
    roles: list[tuple[KeyPath, SignalTable | SetpointTable]] = [
        (("signals", "measurement"), signals.measurement),
        (("signals", "setpoint"), signals.setpoint),
        (("signals", "actuator"), signals.actuator),
        *((("signals", "disturbances", n), signal) for n, signal in enumerate(signals.disturbances)),
    ]
    for at, signal in roles:
        if signal.range is not None:
            yield from _ordered((*at, "range"), signal.range[0], signal.range[1])
        if signal.scale == 0:
            yield _fault((*at, "scale"), "is zero", "0", "any other number", "correct it")
    yield from _check_setpoint(signals.setpoint, signals.measurement)
    yield from _check_actuator(signals.actuator)
    yield from _check_columns(roles)


def _check_setpoint(setpoint: SetpointTable, measurement: SignalTable) -> Iterator[Fault]:
    at = ("signals", "setpoint")
    if (setpoint.column is None) == (setpoint.value is None):
        found = "neither" if setpoint.column is None else "both"
        do = 'write { column = "…" } for a logged setpoint or { value = 2.0 } for a constant one'
        yield _fault(at, "needs a column or a value", found, "one of column and value", do)
    for key in ("scale", "offset", "range", "resolution", "stored", "time"):
        if setpoint.value is not None and key in setpoint.model_fields_set:
            do = f"state the value as the loop uses it and remove {key}"
            yield _fault((*at, key), "does not go with a constant setpoint", key, "value and unit only", do)
    units = setpoint.unit.strip(), measurement.unit.strip()
    if all(units) and units[0] != units[1]:
        do = "bring one of them to the other's unit with scale and offset, and state the same unit"
        yield _fault((*at, "unit"), "differs from the measurement's", units[0], units[1], do)


def _check_actuator(actuator: ActuatorTable) -> Iterator[Fault]:
    low, high = ("signals", "actuator", "low"), ("signals", "actuator", "high")
    if actuator.range is not None and (actuator.low is not None or actuator.high is not None):
        at, do = ("signals", "actuator", "range"), "remove one of them"
        yield _fault(at, "says what low and high say", "both", "low and high, or range", do, low, high)
    if actuator.low is not None and actuator.high is not None:
        yield from _ordered(low, actuator.low, actuator.high, high)


def _check_columns(roles: Iterable[tuple[KeyPath, SignalTable | SetpointTable]]) -> Iterator[Fault]:
    seen: dict[str, KeyPath] = {}
    for at, signal in roles:
        if signal.column is None:
            continue
        if signal.column in seen:
            other = (*seen[signal.column], "column")
            what = f"is also the column of {in_words(other[:-1])}"
            found, do = as_written(signal.column), "correct one of the two"
            yield _fault((*at, "column"), what, found, "a column of its own", do, other)
        seen.setdefault(signal.column, at)


def _ordered(at: KeyPath, low: float, high: float, *reads: KeyPath) -> Iterator[Fault]:
    if not low < high:
        found = f"low {low:g}, high {high:g}"
        yield _fault(at, "is upside down", found, "low below high", "correct them", *reads)


def check_clocks(log: LogTable, signals: SignalsTable) -> Iterator[Fault]:
    """Check that a signal has a time column of its own in the wide layout only: each tag of a long log has its rows."""
    tables: list[tuple[KeyPath, SignalTable | SetpointTable | ModeTable | None]] = [
        (("signals", "measurement"), signals.measurement),
        (("signals", "setpoint"), signals.setpoint),
        (("signals", "actuator"), signals.actuator),
        (("signals", "mode"), signals.mode),
        *((("signals", "disturbances", n), signal) for n, signal in enumerate(signals.disturbances)),
    ]
    for at, table in tables:
        if log.layout == "long" and table is not None and table.time is not None:
            expected = "the times of its tag's rows"
            yield _fault((*at, "time"), "is for the wide layout only", as_written(table.time), expected, "remove it")


def check_controller(controller: ControllerTable, actuator: ActuatorTable | None) -> Iterator[Fault]:
    """Check `[controller]`: one way to state the gain, one to state the integral action, and nothing that has no use.

    Parameters
    ----------
    controller : ControllerTable
    actuator : ActuatorTable or None
        None when `[signals]` is not there.
    """
    yield from _check_gain(controller)
    yield from _check_band(controller)
    if controller.proportional_band is not None and actuator is not None and actuator_span(actuator) is None:
        do = 'add low and high to signals.actuator (or unit = "%")'
        at, expected, other = (
            ("controller", "proportional_band"),
            "low and high of the actuator",
            ("signals", "actuator"),
        )
        yield _fault(at, "needs the actuator's span", "no low and high", expected, do, other)
    yield from _check_integral(controller)
    if controller.tracking_time > 0 and controller.anti_windup in ("freeze", "none"):
        found = f"anti_windup = {as_written(controller.anti_windup)}"
        expected = 'anti_windup = "back-calculation"'
        yield _odd("tracking_time", "has no use here", found, expected, "remove one of them", "anti_windup")


def _check_gain(controller: ControllerTable) -> Iterator[Fault]:
    if controller.gain is None and controller.proportional_band is None:
        expected = "gain in actuator units per measurement unit, u = gain * (setpoint - measurement)"
        do = "add gain = …, or proportional_band with range and action, or leave [controller] out to have it recovered"
        yield _odd("gain", "is missing", "", expected, do, "proportional_band")
    if controller.gain == 0:
        yield _odd("gain", "is zero", "0", "any other number", "state the gain in actuator units")
    if controller.gain is not None and controller.gain < 0 and controller.action is not None:
        found = f"gain = {controller.gain:g}, action = {as_written(controller.action)}"
        expected = "a positive gain with action, or a signed gain alone"
        yield _odd("action", "and a negative gain both state the sign", found, expected, "remove action", "gain")


def _check_band(controller: ControllerTable) -> Iterator[Fault]:
    key = "proportional_band"
    if controller.proportional_band is None:
        if controller.range is not None:
            expected = "range only beside proportional_band"
            yield _odd("range", "has no use here", "no proportional_band", expected, "remove it", key)
        return
    if controller.gain is not None:
        yield _odd(key, "says what gain says", "both", "one of the two", "remove one of them", "gain")
    if controller.range is None:
        do = "add range = [low, high], the measurement range the band refers to"
        yield _odd(key, "needs the measurement range", "no range", "range = [low, high]", do, "range")
    else:
        yield from _ordered(("controller", "range"), controller.range[0], controller.range[1])
    if controller.action is None:
        do = "add action: reverse when the actuator rises as the measurement falls"
        yield _odd(key, "needs the action", "no action", '"direct" or "reverse"', do, "action")


def _check_integral(controller: ControllerTable) -> Iterator[Fault]:
    ti, repeats = controller.integral_time, controller.repeats_per_minute
    if ti is None and repeats is None:
        do = 'add integral_time = "600s", or integral_time = "none" for a controller without integral action'
        yield _odd("integral_time", "is missing", "", 'a duration, or "none"', do, "repeats_per_minute")
    if ti is not None and repeats is not None:
        what = "says what integral_time says"
        yield _odd("repeats_per_minute", what, "both", "one of the two", "remove one of them", "integral_time")
    if controller.bias is not None and (ti != "none" or repeats is not None):
        do, expected = 'remove bias, or write integral_time = "none"', "bias only without integral action"
        yield _odd("bias", "has no use here", f"{controller.bias:g}", expected, do, "integral_time")


def check_channel(channel: ChannelTable) -> Iterator[Fault]:
    """Check `[channel]`: a duty cycle is a share of time, which needs the time of one message."""
    if channel.duty_cycle is not None and channel.airtime is None:
        at, do = ("channel", "duty_cycle"), "add airtime, the time one message takes, or remove duty_cycle"
        yield _fault(at, "needs the airtime", "no airtime", 'airtime, such as "4ms"', do, ("channel", "airtime"))


def check_limits(limits: LimitsTable, signals: SignalsTable | None) -> Iterator[Fault]:
    """Check `[limits]`: low below high, a band that fits between them, and a constant setpoint inside.

    Parameters
    ----------
    limits : LimitsTable
    signals : SignalsTable or None
        None when `[signals]` is not there.
    """
    low, high, band = ("limits", "low"), ("limits", "high"), ("limits", "band")
    if limits.low is not None and limits.high is not None:
        yield from _ordered(low, limits.low, limits.high, high)
        if limits.band is not None and 2 * limits.band > limits.high - limits.low > 0:
            found = f"±{limits.band:g} between {limits.low:g} and {limits.high:g}"
            expected = f"at most {(limits.high - limits.low) / 2:g}"
            yield _fault(band, "is wider than the limits", found, expected, "correct band, low or high", low, high)
        if not limits.low < limits.high:
            return
    value = signals.setpoint.value if signals else None
    for at, bound, sign in ((low, limits.low, 1.0), (high, limits.high, -1.0)):
        if value is not None and bound is not None and sign * (value - bound) < 0:
            found, expected = f"setpoint {value:g}, {at[-1]} {bound:g}", "a setpoint between low and high"
            what, other = "leaves the constant setpoint outside", ("signals", "setpoint", "value")
            yield _fault(at, what, found, expected, "correct one of the two", other)


def unsupported(raw: Mapping[str, Any]) -> tuple[Mapping[str, Any], list[Fault]]:
    """Take out what this version does not support, and say so once instead of naming its every key as unknown."""
    controller = raw.get("controller")
    if not isinstance(controller, dict):
        return raw, []
    faults, kept = [], dict(controller)
    if "feedforward" in kept:
        del kept["feedforward"]
        do = "remove it, and give the column under signals.disturbances"
        faults.append(
            _fault(("controller", "feedforward"), "is not supported in this version", "", "no feedforward", do)
        )
    kind = controller.get("kind")
    if kind in ("state-feedback", "linear"):
        kept = {}
        do = 'use kind = "pid", or leave [controller] out to have a PID controller recovered from the log'
        faults.append(_fault(("controller", "kind"), "is not supported in this version", as_written(kind), '"pid"', do))
    rest = {key: value for key, value in raw.items() if key != "controller"}
    return ({**rest, "controller": kept} if kept else rest), faults


def _fault(at: KeyPath, what: str, found: str, expected: str, do: str, *reads: KeyPath) -> Fault:
    return Fault(at=at, what=f"{in_words(at)} {what}", found=found, expected=expected, do=do, reads=reads)


def _odd(key: str, what: str, found: str, expected: str, do: str, *reads: str) -> Fault:
    """Return a fault of `[controller]`, whose checks read its other keys."""
    others = (("controller", other) for other in reads)
    return _fault(("controller", key), what, found, expected, do, *others)
