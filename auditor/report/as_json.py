"""`audit.json`: the audit for other programs, exactly as the JSON Schema in `auditor/schema` says."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import fields
from typing import Any

import numpy as np

from auditor.audit import Audit
from auditor.controllers.pid import Pid
from auditor.dangers.interval import Flag
from auditor.identify.plant import Model, Plant
from auditor.logs.findings.base import Finding
from auditor.logs.record import Record, Span
from auditor.objections import accepted_rms_error
from auditor.replay import Measures, Replay
from auditor.report.content import FlagCount, count_flags, flag_counts
from auditor.report.parameters import lag_intervals, parameter_interval
from auditor.report.times import utc
from auditor.sweep import INTERVALS

FORMAT, VERSION = "auditor/audit", 1
MEASURES = tuple(field.name for field in fields(Measures))

Json = dict[str, Any]


def audit_json(audit: Audit) -> str:
    """Write an audit as the text of `audit.json`."""
    return _text(audit_object(audit))


def audit_object(audit: Audit) -> Json:
    """Return an audit as JSON types: a value that is not known is None, times are RFC 3339 UTC."""
    counts = flag_counts(audit)
    known: Json = finite(
        {
            "format": FORMAT,
            "version": VERSION,
            "loop": _loop(audit),
            "log": log_object(audit.record, audit.counted),
            "controller": _controller(audit),
            "model": _model(audit),
            "baseline": measures_object(audit.baseline),
            "replays": [replay_object(r, c) for r, c in zip(audit.replays, counts, strict=True)],
            "flags": [flag_object(flag, audit.record) for flag in audit.flags],
            "recommendation": _recommendation(audit),
            "verdict": _verdict(audit),
            "provenance": _provenance(audit),
        }
    )
    return known


def log_json(record: Record) -> str:
    """Write what was found in a log; nothing is counted before a loop is identified."""
    return _text(log_object(record, ()))


def replay_json(replay: Replay, flags: Sequence[Flag], record: Record) -> str:
    """Write one replay with its flags."""
    count = count_flags(flags, record.period)
    return _text({"replay": replay_object(replay, count), "flags": [flag_object(f, record) for f in flags]})


def _text(body: Json) -> str:
    return json.dumps(finite(body), allow_nan=False, ensure_ascii=False, indent=1) + "\n"


def finite(value: Any) -> Any:
    """Return `value` with JSON types only: NaN and infinities become None, arrays and tuples lists."""
    if isinstance(value, Mapping):
        return {str(key): finite(item) for key, item in value.items()}
    if isinstance(value, (list, tuple, np.ndarray)):
        return [finite(item) for item in value]
    if isinstance(value, (bool, np.bool_)):
        return bool(value)
    if isinstance(value, (int, np.integer)):
        return int(value)
    if isinstance(value, (float, np.floating)):
        return float(value) if math.isfinite(value) else None
    return value.encode("utf-8", "replace").decode("utf-8") if isinstance(value, str) else value


def measures_object(measures: Measures | None) -> Json | None:
    """Return measures under their contract names."""
    return None if measures is None else {name: getattr(measures, name) for name in MEASURES}


def replay_object(replay: Replay, count: FlagCount) -> Json:
    """Return one row of `replays`."""
    setting = replay.setting
    row: Json = {"rule": setting.rule, "link": setting.link, "settings": setting.settings}
    row |= measures_object(replay.measures) or {}
    row |= {
        "interval90": {name: replay.interval90.get(name, (None, None)) for name in INTERVALS},
        "answerable": replay.answerable,
        "refusal": replay.refusal,
        "trust": replay.trust,
        "naive_updates": replay.naive_updates,
        "naive_rms_error": replay.naive_rms_error,
        "against_periodic": replay.against_periodic,
        "against_periodic_rest": replay.against_periodic_rest,
        "periodic_rms_error": replay.periodic_rms_error,
        "rms_difference90": replay.rms_difference90,
        "flags": count.watch + count.danger,
        "danger_flags": count.danger,
        "flagged_s": count.flagged_s,
        "first": measures_object(replay.first),
        "rest": measures_object(replay.rest),
    }
    if replay.by_period:
        row["by_period"] = [{"period": name} | (measures_object(m) or {}) for name, m in replay.by_period]
    return row


def flag_object(flag: Flag, record: Record) -> Json:
    """Return one row of `flags`; `end` is the last sample's time."""
    return {
        "replay": flag.replay,
        "start": _time(record, flag.start),
        "end": _time(record, flag.stop - 1),
        "cause": flag.cause,
        "severity": flag.severity,
        "detail": flag.detail,
        "values": flag.values,
    }


def _time(record: Record, k: int) -> str:
    return utc(int(record.time_ns(k)))


def _loop(audit: Audit) -> Json:
    loop, limits, accept = audit.loop, audit.loop.limits, audit.loop.accept
    return {
        "name": loop.name,
        "description": loop.description,
        "period_s": loop.period,
        "unit": loop.signals.measurement.unit,
        "actuator_unit": loop.signals.actuator.unit,
        "limits": {
            "low": limits.low,
            "high": limits.high,
            "band": limits.band,
            "max_silence_s": limits.max_silence,
            "safety": limits.safety,
        },
        "accept": {
            "max_rms_error": accepted_rms_error(loop, audit.baseline),
            "max_rms_error_assumed": accept.max_rms_error is None,
            "min_saved_fraction": accept.min_saved_fraction,
            "min_hours": accept.min_hours,
        },
        "approval": loop.approval,
        "not_acted_on": sorted(loop.extras),
    }


def usable_fraction(record: Record) -> float:
    """Share of the record's samples that may be used."""
    return float(np.mean(record.valid)) if len(record) else 0.0


def log_object(record: Record, counted: Sequence[Span]) -> Json:
    """Return what was found in a log: rows, spans, lost hours, findings."""
    length = len(record)
    return {
        "rows": record.rows,
        "start": _time(record, 0) if length else None,
        "end": _time(record, length - 1) if length else None,
        "zone": record.zone,
        "samples": length,
        "usable_fraction": usable_fraction(record),
        "spans": [_span(record, s) | {"samples": len(s)} for s in record.spans],
        "counted": [_span(record, s) for s in counted],
        "lost_hours": record.lost_hours,
        "findings": [_finding(f) for f in record.findings],
    }


def _span(record: Record, span: Span) -> Json:
    return {"start": _time(record, span.start), "end": _time(record, span.stop - 1)}


def _finding(finding: Finding) -> Json:
    return {
        "kind": finding.kind,
        "signal": finding.signal,
        "start": None if finding.start is None else utc(finding.start),
        "end": None if finding.end is None else utc(finding.end),
        "count": finding.count,
        "detail": finding.detail,
        "effect": finding.effect,
        "weight": finding.weight,
    }


def _controller(audit: Audit) -> Json:
    model, stated = audit.model, audit.loop.controller
    pid = None if model is None else model.controller
    return {
        "kind": "pid" if pid is not None else (stated.kind if stated else None),
        **_gains(audit, pid),
        "form": None if pid is None and stated is None else "ideal",
        "stated_form": stated.form if stated else None,
        "source": model.controller_source if model else ("file" if stated else None),
        "skew_samples": model.skew_samples if model else None,
        "null_replay": model.null_replay if model else None,
        "injected": model.injected if model else None,
    }


def _gains(audit: Audit, pid: Pid | None) -> Json:
    source: Any = pid if pid is not None else audit.loop.controller
    take = (lambda name: getattr(source, name)) if source is not None else (lambda name: None)
    return {
        "gain": take("gain"),
        "integral_time_s": take("integral_time"),
        "derivative_time_s": take("derivative_time"),
        "derivative_filter": take("derivative_filter"),
        "derivative_on": take("derivative_on"),
        "setpoint_weight": take("setpoint_weight"),
        "error_deadband": take("error_deadband"),
        "integral": take("integral"),
        "gap_integral": take("gap_integral"),
        "anti_windup": take("anti_windup"),
        "tracking_time_s": take("tracking_time"),
    }


def _model(audit: Audit) -> Json:
    model = audit.model
    return {
        **_plant(model.likeliest if model else None),
        "explained_percent": model.explained_percent if model else None,
        "explained_held_out_percent": model.explained_held_out_percent if model else None,
        "modes": model.modes if model else 0,
        "draws": len(model.plants) if model else 0,
        "dropped_draws": model.dropped if model else 0,
        "interval90": _spread(model),
        "closed_loop_time_constant_s": model.tau_cl_s if model else None,
        "peak_sensitivity": model.peak_sensitivity if model else None,
        "pure_regulation": model.pure_regulation if model else None,
        "trust": model.trust if model else "none",
        "reasons": model.reasons if model else ("the log carries no loop that could be identified",),
    }


def _plant(plant: Plant | None) -> Json:
    names = ("structure", "order", "delay_s", "gain", "gain_per_s", "integrating", "damping", "zero_s")
    known: Json = {name: None if plant is None else getattr(plant, name) for name in names}
    return known | {"time_constants_s": [] if plant is None else plant.time_constants_s}


def _spread(model: Model | None) -> Json:
    return {name: parameter_interval(model, name) for name in ("gain", "gain_per_s", "delay_s")} | {
        "time_constants_s": lag_intervals(model)
    }


def _recommendation(audit: Audit) -> Json:
    index = audit.recommendation.replay
    replay = None if index is None else audit.replays[index]
    return {
        "replay": index,
        "reasons": audit.recommendation.reasons,
        "chosen_on": measures_object(replay.first) if replay else None,
        "judged_on": measures_object(replay.rest) if replay else None,
    }


def _verdict(audit: Audit) -> Json:
    verdict = audit.verdict
    return {"decision": verdict.decision, "reasons": verdict.reasons, "cautions": verdict.cautions}


def _provenance(audit: Audit) -> Json:
    known, inputs = audit.provenance, audit.record.inputs
    return {
        "inputs": [{"path": i.path, "bytes": i.bytes, "sha256": i.sha256} for i in inputs],
        "auditor_version": known.auditor_version,
        "packages": known.packages,
        "seed": known.seed,
        "created": known.created,
        "command": known.command,
    }
