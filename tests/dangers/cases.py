"""One small loop whose replay a test bends where it wants: 400 samples of 60 s, 20 plants, settling in 20 samples.

The record swings by 0.02 m around its setpoint of 2 m and by 5 % around 50 %; a replay is the record itself,
updated every fifth sample, until a test changes it.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from auditor.controllers.pid import Pid
from auditor.dangers import Case, Detector, Flag
from auditor.dangers.flags import raise_flags
from auditor.identify.plant import Model
from auditor.logs.record import Record, Span
from auditor.loop import Actuator, Limits, LogSource, Loop, Signal, Signals
from auditor.replay import Setting

SAMPLES, LANES, PERIOD = 400, 20, 60.0
SETTLING, TAU_CL = 20, 5
LIMITS = Limits(low=1.8, high=2.3, band=0.05, max_silence=1800.0)

SIGNALS = Signals(
    measurement=Signal(column="level", unit="m"),
    setpoint=Signal(value=2.0),
    actuator=Actuator(column="gate", unit="%"),
)
MODEL = Model(
    plants=(),
    best=0,
    controller=Pid(gain=12.0, low=0.0, high=100.0),
    controller_source="log",
    skew_samples=0,
    null_replay=0.0,
    injected=False,
    explained_by_error=0.0,
    period=PERIOD,
    tau_cl_s=TAU_CL * PERIOD,
    peak_sensitivity=1.4,
    modes=1,
    dropped=0,
    explained_percent=None,
    explained_held_out_percent=None,
    pure_regulation=True,
    trust="good",
    reasons=(),
)


def plain_record(**changes: Any) -> Record:
    """The record; `changes` replace its fields."""
    k = np.arange(SAMPLES)
    record = Record(
        period=PERIOD,
        start=0,
        y=2.0 + 0.02 * np.sin(2 * np.pi * k / 17),
        r=np.full(SAMPLES, 2.0),
        u=50.0 + 5.0 * np.cos(2 * np.pi * k / 23),
        w=np.zeros((0, SAMPLES)),
        valid=np.ones(SAMPLES, dtype=np.bool_),
        spans=(Span(0, SAMPLES),),
    )
    return replace(record, **changes)


@dataclass
class Bench:
    """A case in the making: arrays of shape (SAMPLES, LANES) to change before `flags`."""

    record: Record = field(default_factory=plain_record)
    limits: Limits = LIMITS
    controller: Pid = MODEL.controller
    loop_changes: dict[str, Any] = field(default_factory=dict)
    counted: tuple[Span, ...] = (Span(10, SAMPLES),)
    rule: str = "send-on-delta"
    lanes: int = LANES

    def __post_init__(self) -> None:
        self.y = np.repeat(self.record.y[:, None], self.lanes, axis=1)
        self.u = np.repeat(self.record.u[:, None], self.lanes, axis=1)
        self.updated = np.zeros((SAMPLES, self.lanes), dtype=np.bool_)
        self.updated[::5] = True

    def case(self) -> Case:
        """The case as it stands."""
        loop = Loop(
            name="pool",
            period=PERIOD,
            log=LogSource(paths=(), folder=Path()),
            signals=SIGNALS,
            limits=self.limits,
            **self.loop_changes,
        )
        return Case(
            record=self.record,
            loop=loop,
            model=replace(MODEL, controller=self.controller),
            counted=self.counted,
            setting=Setting(rule=self.rule),
            y=self.y,
            u=self.u,
            updated=self.updated,
        )

    def flags(self, detector: Detector) -> tuple[Flag, ...]:
        """What one detector says."""
        return raise_flags(self.case(), 3, detector)

    def only_flag(self, detector: Detector) -> Flag:
        """The one flag a detector raises."""
        (flag,) = self.flags(detector)
        return flag


def where(flag: Flag) -> tuple[int, int, str]:
    """Interval and severity."""
    return flag.start, flag.stop, flag.severity
