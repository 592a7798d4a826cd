"""A made-up audit with realistic signals: a canal pool under PI control, 20 000 samples, 40 replays.

The replays come from a small simulation of all settings side by side, so that curves, series and flags belong
together; uncertainty is invented. Nothing here is compared with a truth.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from types import MappingProxyType

import numpy as np
import scipy.linalg

from auditor.arrays import FloatArray, read_only
from auditor.audit import Audit, Provenance
from auditor.controllers.pid import Pid
from auditor.dangers.interval import Flag
from auditor.identify.plant import Load, Model, Plant
from auditor.logs.findings.base import Finding
from auditor.logs.record import InputFile, Record, Span
from auditor.loop import Accept, Actuator, ControllerSettings, Limits, LogSource, Loop, Signal, Signals
from auditor.replay import Measures, Replay, Series, Setting
from auditor.verdict import Recommendation, Verdict

PERIOD, LENGTH = 60.0, 20_000
START = 1_742_770_800_000_000_000  # 2025-03-24 00:00 in Amsterdam, so that the clock change of spring lies inside
GAIN, LAG, DELAY = 0.02, 1800.0, 5
CONTROL, INTEGRAL_TIME = 80.0, 1500.0
SPANS = (Span(0, 9_000), Span(9_240, LENGTH))
COUNTED = (Span(600, 9_000), Span(9_840, LENGTH))
SWITCH = "switch"


def settings() -> tuple[Setting, ...]:
    """Forty settings of five rules."""

    def one(rule: str, name: str, value: float, link: str = "sensor") -> Setting:
        return Setting(rule=rule, link=link, values=MappingProxyType({name: value}), max_silence_s=1800.0)

    return (
        *(one("periodic", "every", n) for n in (2, 3, 4, 5, 6, 8, 10, 12, 15, 20)),
        *(one("send-on-delta", "delta", d) for d in np.geomspace(0.004, 0.06, 10)),
        *(one("send-on-area", "area", a) for a in np.geomspace(0.6, 20.0, 8)),
        *(one("error-area", "area", a) for a in np.geomspace(0.6, 40.0, 6)),
        *(one("actuator-deadband", "delta", a, "actuator") for a in np.geomspace(0.2, 4.0, 6)),
    )


@dataclass(frozen=True, eq=False)
class World:
    """Signals of the record and of every setting, (N,) and (N, settings)."""

    r: FloatArray
    y: FloatArray
    u: FloatArray
    replayed_y: FloatArray
    replayed_u: FloatArray
    updated: FloatArray


def simulate(seed: int = 7) -> World:
    """Run the recorded loop (column 0) and all settings on the same load."""
    rng = np.random.default_rng(seed)
    rules = settings()
    lanes = len(rules) + 1
    r = np.full(LENGTH, 2.0)
    r[6_000:8_000] += 0.06
    r[13_000:] -= 0.05
    load = np.zeros(LENGTH)
    kicks = rng.normal(0, 0.5, LENGTH)
    for k in range(1, LENGTH):
        load[k] = 0.995 * load[k - 1] + kicks[k]
    load += np.where(np.isin(np.arange(LENGTH) // 400, (9, 21, 37, 44)), 9.0, 0.0)
    noise = rng.normal(0, 0.0012, LENGTH)
    y, u, sent = (np.zeros((LENGTH, lanes)) for _ in range(3))
    x, integral, e_sent, total, silence, since = (np.zeros(lanes) for _ in range(6))
    command = np.full(lanes, 50.0)
    pole = np.exp(-PERIOD / LAG)
    value = np.array([next(iter(s.values.values())) for s in rules])
    kinds = np.array(["every", *(s.rule for s in rules)])
    own_area, clock, always = kinds == "error-area", kinds == "periodic", kinds == "actuator-deadband"
    area = own_area | (kinds == "send-on-area")
    threshold = np.append(-1.0, np.where(clock[1:], value - 0.5, value))
    silence = np.append(1.0, [30.0] * len(rules))
    for k in range(LENGTH):
        y[k] = 2.0 + x + noise[k]
        e = r[k] - y[k]
        since += 1
        moved = np.abs(e - e_sent)
        total += PERIOD * np.where(own_area, np.abs(e), moved)
        would = 50.0 + CONTROL * e + integral
        watched = np.where(area, total, np.where(clock, since, np.where(always, np.abs(would - command), moved)))
        fire = (watched > threshold) | (since >= silence)
        gap_error = np.where(always, e, e_sent * since)
        integral = np.where(fire | always, integral + CONTROL * PERIOD / INTEGRAL_TIME * gap_error, integral)
        command = np.where(fire, 50.0 + CONTROL * e + integral, command)
        e_sent = np.where(fire, e, e_sent)
        total[fire] = since[fire] = 0.0
        u[k], sent[k] = command, fire
        x = pole * x + GAIN * (1 - pole) * (u[max(0, k - DELAY)] - 50.0 - load[k])
    return World(r, y[:, 0], u[:, 0], y[:, 1:], u[:, 1:], sent[:, 1:] > 0)


def measures(y: FloatArray, u: FloatArray, sent: FloatArray, r: FloatArray, part: FloatArray) -> Measures:
    """Measures over the samples `part`."""
    e = (r - y)[part]
    hours = part.sum() * PERIOD / 3600
    updates = float(sent[part].sum())
    gaps = np.diff(np.flatnonzero(sent & part)) * PERIOD
    gaps = gaps if len(gaps) else np.array([np.nan])
    in_hour = np.convolve((sent & part).astype(float), np.ones(60), mode="valid")
    return Measures(
        updates=updates,
        updates_per_hour=updates / hours,
        saved_fraction=1 - updates / float(part.sum()),
        rms_error=float(np.sqrt(np.mean(e**2))),
        iae_per_hour=float(np.abs(e).sum() * PERIOD / hours),
        max_abs_error=float(np.abs(e).max()),
        outside_band_s=float((np.abs(e) > 0.05).sum() * PERIOD),
        outside_limits_s=float(((y[part] < 1.88) | (y[part] > 2.14)).sum() * PERIOD),
        min_gap_s=float(gaps.min()),
        median_gap_s=float(np.median(gaps)),
        max_gap_s=float(np.minimum(gaps, 1800.0).max()),
        peak_updates_per_hour=float(in_hour.max()),
        actuator_travel=float(np.abs(np.diff(u[part])).sum()),
        saturated_s=float(((u[part] <= 0) | (u[part] >= 100)).sum() * PERIOD),
        hours=float(hours),
    )


def parts() -> tuple[FloatArray, FloatArray, FloatArray]:
    """Counted samples, their first 60 %, and the rest."""
    counted = np.zeros(LENGTH, dtype=bool)
    for span in COUNTED:
        counted[span.start : span.stop] = True
    order = np.cumsum(counted) / counted.sum()
    return counted, counted & (order <= 0.6), counted & (order > 0.6)


def make_replays(world: World) -> tuple[Replay, ...]:
    """The answers, with an invented spread that grows as updates get fewer."""
    rng = np.random.default_rng(3)
    counted, first, rest = parts()
    rows = []
    for i, setting in enumerate(settings()):
        signals = (world.replayed_y[:, i], world.replayed_u[:, i], world.updated[:, i], world.r)
        whole = measures(*signals, counted)
        spread = 0.004 + 0.05 * whole.saved_fraction**6
        members = {
            name: read_only(getattr(whole, name) * (1 + spread * rng.normal(size=24)))
            for name in ("updates", "rms_error")
        }
        interval = {name: tuple(float(q) for q in np.quantile(members[name], (0.05, 0.95))) for name in members}
        interval |= {
            name: (getattr(whole, name) * (1 - spread), getattr(whole, name) * (1 + spread))
            for name in ("iae_per_hour", "max_abs_error")
        }
        refused = setting.rule == "send-on-delta" and setting.values["delta"] < 0.005
        rows.append(
            Replay(
                setting=setting,
                measures=whole,
                interval90=interval,
                first=measures(*signals, first),
                rest=measures(*signals, rest),
                by_period=(),
                answerable=not refused,
                refusal="delta 0.004 m is 2.0 resolution steps of the log (0.002 m); at least 3 are needed"
                if refused
                else None,
                trust="good" if spread < 0.01 else "limited",
                naive_updates=whole.updates * (1 + 0.3 * whole.saved_fraction),
                naive_rms_error=0.021,
                against_periodic="unclear" if setting.rule == "periodic" else "better",
                periodic_rms_error=whole.rms_error * 1.2,
                rms_difference90=(-0.006, -0.002),
                against_periodic_rest="unclear" if setting.rule == "periodic" else "better",
                members=MappingProxyType(members),
                series=Series(y=read_only(signals[0]), u=read_only(signals[1]), updated=read_only(signals[2])),
            )
        )
    return tuple(rows)


def make_flags(replays: tuple[Replay, ...], record: Record, focus: int) -> tuple[Flag, ...]:
    """Flags where the replays really leave limits, and invented ones of every other kind on the focus."""
    flags = []
    for i, one in enumerate(replays):
        assert one.series is not None
        outside = (one.series.y < 1.88) | (one.series.y > 2.14)
        edges = np.flatnonzero(np.diff(np.r_[False, outside, False].astype(int))).reshape(-1, 2)
        for start, stop in edges[:80]:
            share = 0.9 if stop - start > 10 else 0.3
            detail = f"level {np.abs(one.series.y[start:stop] - 2).max() + 2:.2f} m against 1.88 … 2.14 m"
            flags.append(_flag(i, int(start), int(stop), "limit", share, detail))
    for n, cause in enumerate(("band", "silence", "rate", "outside-model", "growth")):
        for k in range(n + 1):
            start = 1_500 + 3_100 * k + 700 * n
            flags.append(
                _flag(focus, start, start + 20 + 60 * n, cause, 0.2 + 0.05 * n, f"{cause} for {20 + 60 * n} min")
            )
    return tuple(flags)


def _flag(replay: int, start: int, stop: int, cause: str, share: float, detail: str) -> Flag:
    severity = "danger" if share >= 0.5 else "watch"
    values = MappingProxyType({"share": share, "samples": float(stop - start)})
    return Flag(replay=replay, start=start, stop=stop, cause=cause, severity=severity, detail=detail, values=values)


def make_record(world: World) -> Record:
    """The log on its own clock, with a hole of four hours."""
    valid = np.zeros(LENGTH, dtype=bool)
    for span in SPANS:
        valid[span.start : span.stop] = True
    y, u = (np.where(valid, signal, np.nan) for signal in (world.y, world.u))
    hole = START + int(9_000 * PERIOD * 1e9)
    findings = (
        Finding(
            kind="gap",
            start=hole,
            end=hole + int(239 * PERIOD * 1e9),
            count=240,
            detail="no rows for 4 h",
            effect="cut: the record is used in two spans",
            weight="limits the answer",
        ),
        Finding(
            kind="quantised",
            start=None,
            end=None,
            count=LENGTH,
            signal="level",
            detail="steps of 0.002 m",
            effect="none",
        ),
        Finding(
            kind="duplicate",
            start=hole - 10**13,
            end=hole - 10**13,
            count=3,
            detail="3 rows with a time already seen",
            effect="first one kept",
        ),
    )
    return Record(
        period=PERIOD,
        start=START,
        y=read_only(y),
        r=read_only(world.r),
        u=read_only(u),
        w=read_only(np.zeros((0, LENGTH))),
        valid=read_only(valid),
        spans=SPANS,
        y_quantum=0.002,
        log_step=PERIOD,
        low=0.0,
        high=100.0,
        findings=findings,
        lost_hours=MappingProxyType({"hole": 4.0, "warm-up": 20.0}),
        rows=LENGTH - 237,
        inputs=(InputFile(path="pool-7.csv", bytes=812_344, sha256="3f" * 32),),
        zone="Europe/Amsterdam",
    )


def make_model() -> Model:
    """Twenty-four first-order plants about the true one."""
    rng = np.random.default_rng(11)
    factors = np.exp(0.06 * rng.normal(size=(24, 2)))
    factors[0] = 1.0
    return Model(
        plants=tuple(_plant(GAIN * g, LAG * t) for g, t in factors),
        best=0,
        controller=Pid(gain=CONTROL, integral_time=INTEGRAL_TIME, low=0.0, high=100.0, integral="forward"),
        controller_source="log",
        skew_samples=0,
        null_replay=2.4e-7,
        injected=False,
        explained_by_error=1.0,
        period=PERIOD,
        tau_cl_s=900.0,
        peak_sensitivity=1.6,
        modes=2,
        dropped=0,
        explained_percent=71.2,
        explained_held_out_percent=64.9,
        pure_regulation=False,
        trust="good",
        reasons=("the record comes back to 2.4e-7 of the error's deviation", "the answers' intervals are within 5 %"),
    )


def _plant(gain: float, lag: float) -> Plant:
    pole = float(scipy.linalg.expm(np.array([[-PERIOD / lag]]))[0, 0])
    return Plant(
        A=read_only(np.array([[pole]])),
        B0=read_only(np.array([gain * (1 - pole)])),
        B1=read_only(np.zeros(1)),
        C=read_only(np.ones(1)),
        delay=DELAY,
        structure="lags",
        delay_s=DELAY * PERIOD,
        gain=gain,
        gain_per_s=None,
        time_constants_s=(lag,),
        load=Load(entry="input", phi=0.99, walk=0.1, noise=0.05),
    )


def make_loop() -> Loop:
    """The loop file's content."""
    return Loop(
        name="pool-7-level",
        description="Water level upstream of gate 7, Ostra main canal",
        period=PERIOD,
        log=LogSource(paths=("pool-7.csv",), folder=Path(), timezone="Europe/Amsterdam"),
        signals=Signals(
            measurement=Signal(column="level", unit="m"),
            setpoint=Signal(column="target", unit="m"),
            actuator=Actuator(column="gate", unit="%", low=0, high=100),
        ),
        controller=ControllerSettings(gain=CONTROL, integral_time=INTEGRAL_TIME),
        limits=Limits(low=1.88, high=2.14, band=0.05, max_silence=1800.0),
        accept=Accept(),
        approval=MappingProxyType({"change_number": "MOC-2025-118", "limits_owner": "A. de Wit, water control"}),
        extras=MappingProxyType({"energy": MappingProxyType({"per_update": "18 mJ"})}),
    )


def make_audit() -> Audit:
    """An audit that recommends a switch."""
    world = simulate()
    counted, first, rest = parts()
    every = np.ones(LENGTH, dtype=bool)
    recorded = (world.y, world.u, every, world.r)
    baseline = measures(*recorded, counted)
    replays, record = make_replays(world), make_record(world)
    within = [
        i
        for i, one in enumerate(replays)
        if one.answerable
        and one.setting.rule == "send-on-delta"
        and one.interval90["rms_error"][1] < 1.25 * baseline.rms_error
    ]
    focus = max(within, key=lambda i: replays[i].measures.saved_fraction)
    chosen = replays[focus]
    return Audit(
        loop=make_loop(),
        record=record,
        model=make_model(),
        counted=COUNTED,
        baseline=baseline,
        baseline_first=measures(*recorded, first),
        baseline_rest=measures(*recorded, rest),
        replays=replays,
        flags=tuple(f for f in make_flags(replays, record, focus) if f.replay != focus or f.severity == "watch"),
        recommendation=Recommendation(
            replay=focus,
            reasons=(f"saves {chosen.first.saved_fraction:.0%} of the updates on the first 60 % of the counted time",),
        ),
        verdict=Verdict(
            decision=SWITCH,
            reasons=(
                f"saves {chosen.measures.saved_fraction:.0%} of the updates; 30 % are wanted",
                f"RMS error at most {chosen.interval90['rms_error'][1]:.4f} m; "
                f"{1.25 * baseline.rms_error:.4f} m is accepted",
                "beats the slowed-down clock at the same number of updates on both parts of the record",
                "no danger flag stands, on the part where it was chosen and on the rest",
            ),
            cautions=(
                "An offline replay on an identified model is not a proof of stability.",
                "Safety functions stay on their fixed schedule and out of this.",
                "A change of update scheme goes through the site's management of change and a licensed "
                "control engineer.",
                "Pilot first, with the watchdog on.",
            ),
        ),
        provenance=Provenance(
            auditor_version="0.1.0",
            packages=MappingProxyType({"numpy": "2.4.6", "scipy": "1.17.1"}),
            seed=1,
            created="2025-05-02T09:14:03Z",
            command="auditor audit pool-7.toml --seed 1",
        ),
    )


def without_model(audit: Audit) -> Audit:
    """The same log when no loop could be identified."""
    return replace(
        audit,
        model=None,
        replays=(),
        flags=(),
        recommendation=Recommendation(replay=None, reasons=("nothing could be replayed",)),
        verdict=replace(audit.verdict, decision="undecided", reasons=("the actuator never moved in automatic",)),
    )


def without_answers(audit: Audit) -> Audit:
    """The same audit when the log carries no setting, and no limits were stated."""
    refused = tuple(
        replace(r, answerable=False, refusal="the log's steps are too coarse", trust="none") for r in audit.replays
    )
    return replace(
        audit,
        loop=replace(audit.loop, limits=Limits()),
        replays=refused,
        flags=(),
        recommendation=Recommendation(replay=None, reasons=("no setting was answered",)),
        verdict=replace(audit.verdict, decision="undecided", reasons=("no limits and band were stated",)),
    )


def kept(audit: Audit) -> Audit:
    """The same audit when nothing is worth the change."""
    return replace(
        audit,
        recommendation=Recommendation(replay=None, reasons=("no setting saves 60 % within the accepted error",)),
        verdict=replace(audit.verdict, decision="keep", reasons=("no setting saves 60 % within the accepted error",)),
    )


EVIL = '<script src="http://evil.example/x.js">alert(1)</script>$\\frac{1}{0}$&"\x07'


def hostile(audit: Audit) -> Audit:
    """The same audit with names that would be markup, formulas or picture code."""
    loop, record = audit.loop, audit.record
    signals = replace(loop.signals, measurement=replace(loop.signals.measurement, column=EVIL, unit="<b>m</b>"))
    finding = replace(record.findings[0], signal=EVIL, detail='=HYPERLINK("http://evil.example")', kind="@gap")
    flags = tuple(replace(f, detail=f"=1+1 {EVIL}") for f in audit.flags)
    replays = list(audit.replays)
    replays[0] = replace(replays[0], setting=replace(replays[0].setting, rule="+cmd|' /C calc'!A0"))
    return replace(
        audit,
        loop=replace(loop, name=EVIL, description=EVIL, signals=signals),
        record=replace(record, findings=(finding,), inputs=(InputFile(path=EVIL, bytes=1, sha256="00" * 32),)),
        replays=tuple(replays),
        flags=flags,
        verdict=replace(audit.verdict, reasons=(EVIL,)),
    )


def many(audit: Audit) -> Audit:
    """The same audit with four hundred replays, half of them dangerous."""
    replays = tuple(
        replace(one, setting=replace(one.setting, min_gap_s=60.0 * (1 + n)), series=None)
        for n in range(10)
        for one in audit.replays
    )
    more = tuple(_flag(i, 2_000 + i, 2_400 + i, "limit", 0.9, "level below 1.88 m") for i in range(40, len(replays), 2))
    return replace(audit, replays=(*audit.replays, *replays[40:]), flags=audit.flags + more)
