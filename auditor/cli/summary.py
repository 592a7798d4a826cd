"""Results as a terminal shows them."""

from __future__ import annotations

from typing import TYPE_CHECKING

from auditor.cli.screen import bullets, paragraph, table, table_with_notes
from auditor.text import duration, number, percent

if TYPE_CHECKING:
    from auditor.audit import Audit
    from auditor.identify.plant import Model
    from auditor.logs.record import Record
    from auditor.loop import Loop
    from auditor.replay import Replay

WORDS = {
    "switch": "SWITCH: the record supports updating on events",
    "keep": "KEEP the clock",
    "undecided": "UNDECIDED: this log does not settle it",
}


LEGEND = (
    "> chosen; 90 % interval of the RMS error; trust in this answer; danger: danger flags; clock: better, worse or ? "
    "(not to be told) against the best slowed-down clock with no more updates"
)


def decision(audit: Audit) -> str:
    """The decision in about ten lines, and the settings worth a look."""
    head = f"{audit.loop.name}: {WORDS[audit.verdict.decision]}"
    parts = [head, "=" * min(len(head), 80), bullets(audit.verdict.reasons)]
    if audit.model is not None:
        parts.append(paragraph(f"Trust in the model: {audit.model.trust}. {audit.model.reasons[0]}"))
    if audit.replays:
        parts += ["", shortlist(audit), paragraph(LEGEND)]
    parts += ["", *[paragraph(f"! {c}") for c in audit.verdict.cautions[:3]]]
    return "\n".join(parts)


def shortlist(audit: Audit) -> str:
    """The recommended setting, the best of each rule, and the record."""
    unit = audit.loop.signals.measurement.unit
    rows = [_baseline_row(audit)]
    chosen = audit.recommendation.replay
    best: dict[str, int] = {}
    for i, r in enumerate(audit.replays):
        if r.answerable and (r.setting.rule not in best or _nearer(audit, i, best[r.setting.rule])):
            best[r.setting.rule] = i
    picked = sorted({*best.values(), *([chosen] if chosen is not None else [])})
    rows += [_row(audit, i, mark="> " if i == chosen else "") for i in picked]
    head = ["rule", "setting", "updates/h", "saved", f"RMS [{unit}]", "90 %", "trust", "danger", "clock"]
    right = [False, False, True, True, True, True, False, True, False]
    return table(head, rows, right)


def _nearer(audit: Audit, a: int, b: int) -> bool:
    """True when setting a is a better example of its rule: an acceptable error first, then fewer updates."""
    from auditor.objections import accepted_rms_error

    limit = accepted_rms_error(audit.loop, audit.baseline)

    def rank(i: int) -> tuple[bool, float]:
        r = audit.replays[i]
        fine = limit is not None and r.measures.rms_error <= limit
        return (not fine, r.measures.updates if fine else r.measures.rms_error)

    return rank(a) < rank(b)


def _baseline_row(audit: Audit) -> list[str]:
    b = audit.baseline
    if b is None:
        return ["(record)", "", "–", "–", "–", "", "", "", ""]
    return [
        "(record)",
        f"every {duration(audit.loop.period)}",
        number(b.updates_per_hour),
        "0 %",
        number(b.rms_error),
        "",
        "",
        "",
        "",
    ]


def _row(audit: Audit, index: int, mark: str = "") -> list[str]:
    r = audit.replays[index]
    low, high = r.interval90["rms_error"]
    values = " ".join(number(v) for v in r.setting.values.values())
    dangers = sum(f.replay == index and f.severity == "danger" for f in audit.flags)
    return [
        f"{mark}{r.setting.rule}",
        values,
        number(r.measures.updates_per_hour),
        percent(r.measures.saved_fraction),
        number(r.measures.rms_error),
        f"{number(low)}…{number(high)}",
        r.trust,
        str(dangers) if dangers else "-",
        "-" if r.setting.rule == "periodic" else {"unclear": "?"}.get(r.against_periodic, r.against_periodic),
    ]


def replay_lines(replay: Replay, loop: Loop) -> str:
    """One replay in full."""
    unit = loop.signals.measurement.unit
    m = replay.measures
    lines = [
        ("updates", f"{number(m.updates)} (90 % {_pair(replay, 'updates')}), {percent(m.saved_fraction)} saved"),
        ("updates per hour", f"{number(m.updates_per_hour)}, busiest hour {number(m.peak_updates_per_hour)}"),
        ("RMS error", f"{number(m.rms_error)} {unit} (90 % {_pair(replay, 'rms_error')})"),
        ("largest error", f"{number(m.max_abs_error)} {unit} (90 % {_pair(replay, 'max_abs_error')})"),
        ("gaps", " / ".join("–" if v is None else duration(v) for v in (m.min_gap_s, m.median_gap_s, m.max_gap_s))),
        (
            "model left out",
            f"{number(replay.naive_updates)} updates, RMS error {number(replay.naive_rms_error)} {unit}",
        ),
        (
            "against the clock",
            f"{replay.against_periodic} (same or fewer updates: {number(replay.periodic_rms_error)} {unit})",
        ),
        ("trust", replay.trust if replay.answerable else f"none: {replay.refusal}"),
    ]
    return "\n".join(f"{name:<18}{text}" for name, text in lines)


def _pair(replay: Replay, name: str) -> str:
    low, high = replay.interval90[name]
    return f"{number(low)}…{number(high)}"


def record_lines(record: Record, loop: Loop) -> str:
    """What was found in a log."""
    inside = float(record.in_span.sum()) * record.period
    whole = len(record) * record.period
    lines = [
        f"{loop.name}: {record.rows:,} rows, {duration(whole)} at one sample every {duration(record.period)}",
        f"usable {percent(inside / whole if whole else 0.0, 1)} in {len(record.spans)} span(s)",
    ]
    lost = [f"{cause} {number(hours)} h" for cause, hours in record.lost_hours.items() if hours > 0]
    if lost:
        lines.append("lost: " + ", ".join(lost))
    return "\n".join(paragraph(line) for line in lines)


def findings_table(record: Record) -> str:
    """Findings, the weightiest first."""
    if not record.findings:
        return "no findings"
    order = {"stops the answer": 0, "limits the answer": 1, "note": 2}
    rows = [
        [f.kind, f.signal, str(f.count), f"{f.detail}. Effect: {f.effect}."]
        for f in sorted(record.findings, key=lambda f: order.get(f.weight, 3))
    ]
    return table_with_notes(["finding", "signal", "count", "what, and what was done about it"], rows)


def asked_of_log(record: Record, loop: Loop) -> str:
    """What can and cannot be asked of this log, each bound with its reason."""
    lines = [
        f"smallest threshold that can be asked about: {_smallest_threshold(record, loop)}",
        f"shortest update interval that can be asked about: {_shortest_interval(record)}",
        f"verdict: {_enough_hours(record, loop)}",
    ]
    if not loop.limits.stated:
        lines.append("no verdict and no danger of leaving the limits without band and low or high under [limits]")
    return bullets(lines)


def _smallest_threshold(record: Record, loop: Loop) -> str:
    from auditor.replay.refusals import DEADBANDS, QUANTA

    unit = loop.signals.measurement.unit
    floors = [
        (QUANTA * (record.y_quantum or 0.0), "three steps of the stored measurement: below, they flip with rounding"),
        (DEADBANDS * (record.y_deadband or 0.0), "four dead-bands of the archive, which left smaller moves out"),
    ]
    size, why = max(floors)
    return f"{number(size)} {unit} ({why})" if size else "no bound from the log (no step or dead-band is visible in it)"


def _shortest_interval(record: Record) -> str:
    from auditor.replay.refusals import LOG_STEPS

    if record.log_step <= 1.5 * record.period:
        return f"{duration(record.period)} (the base period)"
    step = duration(record.log_step)
    return f"{duration(LOG_STEPS * record.log_step)} on average (five rows of the log, which has one every {step})"


def _enough_hours(record: Record, loop: Loop) -> str:
    hours, asked = float(record.in_span.sum()) * record.period / 3600.0, loop.accept.min_hours
    held = f"the usable spans hold {number(hours)} h, of which the warm-up still goes off"
    if hours < asked:
        return f"cannot be given; {held}, and {number(asked)} h are asked for"
    return f"{held}; {number(asked)} h are asked for"


def model_lines(model: Model, loop: Loop) -> str:
    """Controller, plant and trust."""
    c, p = model.controller, model.likeliest
    y, u = loop.signals.measurement.unit, loop.signals.actuator.unit
    gains = [x.gain for x in model.plants if x.gain is not None]
    lines = [
        f"controller     K {number(c.gain, 4)} {u}/{y}, Ti {_time(c.integral_time)}, Td {_time(c.derivative_time)} "
        f"({c.integral} integral, anti-windup {c.anti_windup}; from the {model.controller_source})",
        f"null replay    {percent(model.null_replay, 2)} of the error's deviation"
        + (", the rest is injected" if model.injected else ""),
        f"plant          {p.structure}, dead time {_range(model, 'delay_s')}, "
        + (
            f"gain {number(p.gain)} {y}/{u}"
            if p.gain is not None
            else f"integrating, {number(p.gain_per_s)} {y}/({u}·s)"
        ),
        f"lags           {', '.join(_time(t) for t in p.time_constants_s) or '–'}",
        f"likely plants  {len(model.plants)} of {model.modes} kind(s), {model.dropped} dropped"
        + (f"; gain {number(min(gains))}…{number(max(gains))}" if gains else ""),
        f"closed loop    time constant {_time(model.tau_cl_s)}, peak sensitivity {number(model.peak_sensitivity)}",
        f"free run       explains {_fit(model.explained_percent)}; held out {_fit(model.explained_held_out_percent)} "
        "(shown, earns no trust)",
        f"trust          {model.trust}",
    ]
    return "\n".join([*lines, bullets(model.reasons)])


def _time(seconds: float) -> str:
    return "none" if seconds == float("inf") else duration(seconds)


def _fit(value: float | None) -> str:
    return "–" if value is None else f"{value:.0f} %"


def _range(model: Model, name: str) -> str:
    values = sorted(float(getattr(p, name)) for p in model.plants)
    return f"{duration(values[0])}…{duration(values[-1])}"
