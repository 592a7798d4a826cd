"""`Loop`: the frozen description of a loop, as its loop file states it.

Durations are seconds, times are nanoseconds since 1970 UTC, everything else is in the log's own units.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any

_NOTHING: Mapping[str, Any] = MappingProxyType({})


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Exclusion:
    """A stretch the owner takes out, start and end in ns UTC (both inclusive), with the owner's reason."""

    start: int
    end: int
    why: str


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class LogSource:
    """Where the log is and how it is dressed; None means "found by looking"."""

    paths: tuple[str, ...]
    folder: Path
    layout: str = "wide"
    time: str = "time"
    time_unit: str | None = None
    time_format: str | None = None
    timezone: str | None = None
    tag: str | None = None
    value: str | None = None
    quality: str | None = None
    delimiter: str | None = None
    decimal: str | None = None
    encoding: str | None = None
    skip_rows: int | None = None
    ambiguous: str | None = None
    good: tuple[Any, ...] = ()
    stale: tuple[Any, ...] = ()
    exclude: tuple[Exclusion, ...] = ()


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Signal:
    """One signal of the loop: a column of the log, or a constant `value`.

    The engineering value is ``scale * raw + offset``; `low`…`high` is the plausible range of a measurement
    (None: not stated); `resolution` the step the signal is stored with (None: found by looking); `time` its own time
    column (None: the log's).
    """

    column: str | None = None
    value: float | None = None
    unit: str = ""
    scale: float = 1.0
    offset: float = 0.0
    low: float | None = None
    high: float | None = None
    resolution: float | None = None
    stored: str | None = None
    time: str | None = None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Actuator(Signal):
    """What acts on the plant; here `low`…`high` are its limits and `max_rate` its slew limit per second."""

    max_rate: float | None = None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Mode:
    """The column that tells automatic operation; any value not in `automatic` is not replayed."""

    column: str
    automatic: tuple[Any, ...]
    time: str | None = None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Signals:
    """The signals of the loop by role."""

    measurement: Signal
    setpoint: Signal
    actuator: Actuator
    disturbances: tuple[Signal, ...] = ()
    mode: Mode | None = None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class ControllerSettings:
    """The controller as the loop file states it, already converted to the ideal form ``K (e + ∫e/Ti + Td de/dt)``.

    `integral`, `anti_windup` are None when the log is to tell; `derivative_filter` is N in T_f = T_d / N.
    """

    kind: str = "pid"
    gain: float = 0.0
    integral_time: float | None = None
    derivative_time: float = 0.0
    form: str = "ideal"
    integral: str | None = None
    gap_integral: str = "held"
    anti_windup: str | None = None
    tracking_time: float = 0.0
    derivative_on: str = "measurement"
    derivative_filter: float = 10.0
    setpoint_weight: float = 1.0
    error_deadband: float = 0.0
    bias: float | None = None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Limits:
    """What the owner states the process must keep; None where nothing was stated."""

    low: float | None = None
    high: float | None = None
    band: float | None = None
    max_silence: float | None = None
    safety: bool = False

    @property
    def stated(self) -> bool:
        """True when at least one limit and the band are there: without them no verdict is given."""
        return self.band is not None and (self.low is not None or self.high is not None)


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Accept:
    """What the decision needs; `max_rms_error` None means 1.25 × the record's."""

    max_rms_error: float | None = None
    min_saved_fraction: float = 0.3
    min_hours: float = 48.0


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Channel:
    """What the link can carry: at most `max_messages` in any `window`, of which `other_traffic` are not ours.

    `airtime` [s] is how long one message occupies the link; `duty_cycle` the share of time one sender may do so.
    """

    window: float
    max_messages: float
    airtime: float | None = None
    duty_cycle: float | None = None
    other_traffic: float = 0.0


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class RuleRequest:
    """One `[[rules]]` table: every setting is a tuple of values to sweep."""

    rule: str
    link: str | None = None
    signal: str | None = None
    between: str | None = None
    settings: Mapping[str, tuple[float, ...]] = field(default_factory=lambda: _NOTHING)


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Loop:
    """Everything a loop file says.

    `extras` keeps the tables that this version reads but does not act on, so that a report can say so.
    """

    name: str
    period: float
    log: LogSource
    signals: Signals
    plant: str | None = None
    description: str = ""
    controller: ControllerSettings | None = None
    limits: Limits = field(default_factory=Limits)
    accept: Accept = field(default_factory=Accept)
    channel: Channel | None = None
    approval: Mapping[str, str] = field(default_factory=lambda: _NOTHING)
    extras: Mapping[str, Mapping[str, Any]] = field(default_factory=lambda: _NOTHING)
    rules: tuple[RuleRequest, ...] = ()
    path: Path | None = None
