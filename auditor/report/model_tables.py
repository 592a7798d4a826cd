"""The identified loop and the conditions of the audit, as tables of words and numbers."""

from __future__ import annotations

import math

from auditor.controllers.pid import Pid
from auditor.identify.plant import Model
from auditor.loop import Accept
from auditor.objections import RMS_MARGIN
from auditor.report.content import Content
from auditor.report.parameters import lag_intervals, parameter_interval
from auditor.report.phrases import clean, measured, whole
from auditor.report.tables import Row, Table, plain_table, seconds, with_unit
from auditor.text import duration, number, percent


def conditions_table(content: Content) -> Table:
    """What the owner stated, and what was assumed because nothing was stated."""
    loop, unit = content.audit.loop, clean(content.audit.loop.signals.measurement.unit)
    limits, accept = loop.limits, loop.accept

    def stated(value: float | None) -> Row:
        if value is None:
            return "–", "not stated: never guessed from the log"
        return with_unit(number(value), unit), "stated in the loop file"

    usual = Accept()
    rms = f"assumed: {RMS_MARGIN:g} times the record's" if content.rms_assumed else "stated in the loop file"
    rows = [
        ("low limit of the process", *stated(limits.low)),
        ("high limit of the process", *stated(limits.high)),
        ("acceptable error (band)", *stated(limits.band)),
        ("longest acceptable silence", seconds(limits.max_silence), stated(limits.max_silence)[1]),
        ("safety function", "yes: never recommended for switching" if limits.safety else "no", "as the loop file says"),
        ("largest RMS error accepted", with_unit(number(content.max_rms_error), unit), rms),
        (
            "smallest saving wanted",
            percent(accept.min_saved_fraction),
            f"loop file, or its default of {percent(usual.min_saved_fraction)}",
        ),
        (
            "fewest hours wanted",
            with_unit(f"{accept.min_hours:g}", "h"),
            f"loop file, or its default of {usual.min_hours:g} h",
        ),
    ]
    return plain_table(("condition", "value", "where it comes from"), rows, numeric=(1,))


def controller_table(content: Content) -> Table:
    """The recorded controller, and what is assumed of it when updates come unevenly."""
    model, signals = content.audit.model, content.audit.loop.signals
    if model is None:
        return plain_table((), ())
    pid = model.controller
    unit = f"{clean(signals.actuator.unit) or '1'} / {clean(signals.measurement.unit) or '1'}"
    sources = {"log": "recovered from the log", "file": "stated in the loop file"}
    rows = [
        ("source", sources.get(model.controller_source, clean(model.controller_source))),
        ("gain", with_unit(number(pid.gain, 4), unit)),
        ("integral time", "none" if math.isinf(pid.integral_time) else seconds(pid.integral_time)),
        ("derivative time", seconds(pid.derivative_time) if pid.derivative_time else "none"),
        ("form of these gains", "ideal: gain × (error + its integral / integral time + derivative)"),
        ("integral in the record", f"{pid.integral} rule"),
        ("integral across a silence", f"{pid.gap_integral} (an assumption about the new controller; no log tells it)"),
        ("at a limit", pid.anti_windup.replace("none", "no anti-windup")),
        ("actuator limits", _limits(pid, clean(signals.actuator.unit))),
        ("null replay", _null_replay(model)),
        ("actuator column against measurement", _skew(model)),
    ]
    return plain_table(("controller", ""), rows)


def _limits(pid: Pid, unit: str) -> str:
    if math.isinf(pid.low) and math.isinf(pid.high):
        return "none"
    text = with_unit(f"{pid.low:g} … {pid.high:g}", unit)
    return text if math.isinf(pid.max_rate) else f"{text}, at most {with_unit(number(pid.max_rate), unit)} per second"


def _null_replay(model: Model) -> str:
    text = f"{number(100 * model.null_replay, 2)} % of the error's deviation"
    return f"{text}; the unexplained part of the actuator is kept in every replay" if model.injected else text


def _skew(model: Model) -> str:
    count = model.skew_samples
    if count == 0:
        return "on the same sample"
    side = "late" if count > 0 else "early"
    return f"{abs(count)} sample{'s' if abs(count) > 1 else ''} {side}; the record was shifted by it"


def plant_table(content: Content) -> Table:
    """The plant: the likeliest draw, and 5–95 % over all of them."""
    model, signals = content.audit.model, content.audit.loop.signals
    if model is None:
        return plain_table((), ())
    unit = f"{clean(signals.measurement.unit) or '1'} / {clean(signals.actuator.unit) or '1'}"
    plant = model.likeliest
    kind = "integrating" if plant.integrating else "self-regulating"
    rows: list[Row] = [("structure", f"{clean(plant.structure)}, order {plant.order}, {kind}", "")]
    for name, words, its in (("gain", "gain", unit), ("gain_per_s", "ramp per second", f"{unit} / s")):
        if getattr(plant, name) is not None:
            rows.append((words, *_with_spread(getattr(plant, name), parameter_interval(model, name), its)))
    rows.append(("dead time", *_durations(plant.delay_s, parameter_interval(model, "delay_s"))))
    spreads = lag_intervals(model)
    for i, lag in enumerate(plant.time_constants_s):
        rows.append((f"lag {i + 1}", *_durations(lag, spreads[i])))
    if plant.damping is not None:
        rows.append(("damping ratio", number(plant.damping), ""))
    if plant.zero_s:
        rows.append(("inverse response" if plant.zero_s < 0 else "zero", seconds(abs(plant.zero_s)), ""))
    rows.append(("closed-loop time constant", seconds(model.tau_cl_s), ""))
    rows.append(("peak sensitivity Ms of the recorded loop", number(model.peak_sensitivity), ""))
    return plain_table(("plant", "likeliest", "5–95 % of the likely plants"), rows, numeric=(2,))


def _with_spread(value: float, interval: tuple[float, float] | None, unit: str) -> Row:
    ends = measured(value, interval).partition(" ")[2].strip("[]")
    return measured(value, interval).partition(" ")[0] + f"\u00a0{unit}", ends


def _durations(value: float, interval: tuple[float, float] | None) -> Row:
    ends = "" if interval is None else f"{duration(interval[0])} … {duration(interval[1])}"
    return seconds(value), ends


def evidence_table(content: Content) -> Table:
    """What engineers expect to see of a model; none of it earns trust by itself."""
    model = content.audit.model
    if model is None:
        return plain_table((), ())
    held_out = model.explained_held_out_percent
    rows = [
        ("free run explains, whole record", with_unit(number(model.explained_percent), "%")),
        ("free run explains, part held out", with_unit(number(held_out), "%")),
        ("setpoint moves in the log", "none that can be used" if model.pure_regulation else "yes"),
        ("likely plants kept", f"{len(model.plants)}, of {model.modes} kind{'s' if model.modes != 1 else ''}"),
        ("dropped, as the recorded loop would be unstable", str(model.dropped)),
    ]
    return plain_table(("evidence", ""), rows)


def input_table(content: Content) -> Table:
    """The files the record came from."""
    inputs = content.audit.record.inputs
    rows = [(clean(one.path), whole(one.bytes), one.sha256) for one in inputs]
    return plain_table(("file", "bytes", "SHA-256"), rows, numeric=(1,))
