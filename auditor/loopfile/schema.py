"""The tables of a loop file as pydantic models: every key the file may hold, its type and its range.

Each model is one table. What involves two keys is in `checks`; what a table means is in `convert`.
"""

from __future__ import annotations

from typing import Annotated, Literal, TypeAlias

from pydantic import BaseModel, ConfigDict, Field

from auditor.loopfile.values import (
    Codes,
    Duration,
    EncodingName,
    Energy,
    FailAction,
    Folder,
    IntegralTime,
    Moment,
    OneCharacter,
    PathList,
    Power,
    Text,
    ZoneName,
)

Positive: TypeAlias = Annotated[float, Field(gt=0)]
NotNegative: TypeAlias = Annotated[float, Field(ge=0)]
Fraction: TypeAlias = Annotated[float, Field(ge=0, le=1)]
Range: TypeAlias = Annotated[list[float], Field(min_length=2, max_length=2)]


class Table(BaseModel):
    """A table that refuses keys it does not know and never bends a value to another type."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True, allow_inf_nan=False)


class LoopTable(Table):
    """`[loop]`."""

    name: Folder = Field(description="a short name, used for the result's folder", examples=['"pool-7-level"'])
    period: Annotated[Duration, Field(gt=0)] = Field(
        description="the base period at which the loop ran", examples=['"60s"']
    )
    plant: Literal["self-regulating", "integrating", "unstable"] | None = None
    description: str = ""


class ExclusionTable(Table):
    """A member of `log.exclude`."""

    from_: Moment = Field(alias="from", description="a date and time", examples=['"2025-03-01T00:00Z"'])
    to: Moment = Field(description="a date and time", examples=['"2025-03-02T00:00Z"'])
    why: Text = Field(description="the reason, for the report", examples=['"pump swap"'])


class LogTable(Table):
    """`[log]`."""

    path: PathList = Field(description="a file, a list, a glob or a folder", examples=['"pool-7.csv"'])
    layout: Literal["wide", "long"] = "wide"
    time: str = "time"  # may be empty: a column without a name is the time column now and then
    time_unit: Literal["s", "ms", "us", "ns"] | None = None
    time_format: Text | None = None
    timezone: ZoneName | None = None
    tag: Text | None = None
    value: Text | None = None
    quality: Text | None = None
    delimiter: OneCharacter | None = None
    decimal: Literal[".", ","] | None = None
    encoding: EncodingName | None = None
    skip_rows: Annotated[int, Field(ge=0)] | None = None
    ambiguous: Literal["first", "second", "order"] | None = None
    good: Codes = []
    stale: Codes = []
    exclude: list[ExclusionTable] = []


class SignalBase(Table):
    """What every signal may state."""

    unit: str = ""
    scale: float = 1.0
    offset: float = 0.0
    range: Range | None = None
    resolution: Positive | None = None
    stored: Literal["every", "on-change", "interpolated"] | None = None
    time: Text | None = None


class SignalTable(SignalBase):
    """A measurement or a measured disturbance."""

    column: Text = Field(description="a column (or tag) of the log", examples=['"level"'])


class SetpointTable(SignalBase):
    """`signals.setpoint`: a column or a constant."""

    column: Text | None = None
    value: float | None = None


class ActuatorTable(SignalTable):
    """`signals.actuator`."""

    low: float | None = None
    high: float | None = None
    max_rate: Positive | None = None


class ModeTable(Table):
    """`signals.mode`."""

    column: Text = Field(description="a column (or tag) of the log", examples=['"mode"'])
    automatic: Annotated[Codes, Field(min_length=1)] = Field(
        description="the values that mean automatic operation", examples=['["AUTO"]']
    )
    time: Text | None = None


class SignalsTable(Table):
    """`[signals]`."""

    measurement: SignalTable = Field(description="the controlled signal", examples=['{ column = "level", unit = "m" }'])
    setpoint: SetpointTable = Field(
        description="a column or a constant", examples=['{ column = "target", unit = "m" }']
    )
    actuator: ActuatorTable = Field(
        description="what acts on the process", examples=['{ column = "gate", unit = "%", low = 0, high = 100 }']
    )
    disturbances: list[SignalTable] = []
    mode: ModeTable | None = None


class ControllerTable(Table):
    """`[controller]`."""

    kind: Literal["pid"] = "pid"
    gain: float | None = None
    proportional_band: Positive | None = None
    range: Range | None = None
    action: Literal["direct", "reverse"] | None = None
    integral_time: IntegralTime | None = None
    repeats_per_minute: Positive | None = None
    bias: float | None = None
    derivative_time: Annotated[Duration, Field(ge=0)] = 0.0
    form: Literal["ideal", "parallel", "series"] = "ideal"
    integral: Literal["forward", "backward", "trapezoid"] | None = None
    gap_integral: Literal["held", "current", "saturating"] = "held"
    anti_windup: Literal["back-calculation", "freeze", "none"] | None = None
    tracking_time: Annotated[Duration, Field(ge=0)] = 0.0
    derivative_on: Literal["measurement", "error"] = "measurement"
    derivative_filter: Positive = 10.0
    setpoint_weight: NotNegative = 1.0
    error_deadband: NotNegative = 0.0


class LimitsTable(Table):
    """`[limits]`."""

    low: float | None = None
    high: float | None = None
    band: Positive | None = None
    max_silence: Annotated[Duration, Field(gt=0)] | None = None
    safety: bool = False


class AcceptTable(Table):
    """`[accept]`."""

    max_rms_error: Positive | None = None
    min_saved_fraction: Fraction = 0.3
    min_hours: NotNegative = 48.0


class ChannelTable(Table):
    """`[channel]`."""

    window: Annotated[Duration, Field(gt=0)] = Field(
        description="the stretch in which messages are counted", examples=['"60s"']
    )
    max_messages: Positive = Field(description="messages the link takes in one window", examples=["10"])
    airtime: Annotated[Duration, Field(gt=0)] | None = None
    duty_cycle: Annotated[float, Field(gt=0, le=1)] | None = None
    other_traffic: NotNegative = 0.0


class FailsafeTable(Table):
    """`[failsafe]`."""

    after: Annotated[Duration, Field(gt=0)] = Field(description="the silence after which it acts", examples=['"30min"'])
    action: FailAction = Field(description='"hold" or an actuator value', examples=['"hold"'])


class EnergyTable(Table):
    """`[energy]`."""

    per_update: Annotated[Energy, Field(ge=0)] | None = None
    per_sample: Annotated[Energy, Field(ge=0)] | None = None
    idle: Annotated[Power, Field(ge=0)] | None = None
    battery: Annotated[Energy, Field(gt=0)] | None = None
    usable_fraction: Annotated[float, Field(gt=0, le=1)] | None = None
    self_discharge_per_year: Fraction | None = None
    cold_factor: Annotated[float, Field(gt=0, le=1)] | None = None


class ApprovalTable(Table):
    """`[approval]`."""

    change_number: str = ""
    limits_owner: str = ""


class RuleTable(Table):
    """A member of `[[rules]]`; every other key is a setting of the rule and is read by `settings`."""

    model_config = ConfigDict(strict=True, extra="allow", frozen=True, allow_inf_nan=False)

    rule: Text = Field(description="the name of a trigger rule", examples=['"send-on-delta"'])
    link: Literal["sensor", "actuator"] | None = None
    signal: Literal["error", "measurement"] | None = None
    between: Literal["hold", "run"] | None = None


TABLES: dict[str, type[Table]] = {
    "loop": LoopTable,
    "log": LogTable,
    "signals": SignalsTable,
    "controller": ControllerTable,
    "limits": LimitsTable,
    "accept": AcceptTable,
    "channel": ChannelTable,
    "failsafe": FailsafeTable,
    "energy": EnergyTable,
    "approval": ApprovalTable,
}
REQUIRED = ("loop", "log", "signals")
