"""From valid tables to the frozen `Loop`."""

from __future__ import annotations

import datetime
import zoneinfo
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import Any

from auditor.loop import (
    Accept,
    Actuator,
    Channel,
    Exclusion,
    Limits,
    LogSource,
    Loop,
    Mode,
    RuleRequest,
    Signal,
    Signals,
)
from auditor.loopfile.faults import Fault
from auditor.loopfile.gains import ideal_settings
from auditor.loopfile.schema import (
    AcceptTable,
    ActuatorTable,
    ApprovalTable,
    ChannelTable,
    ControllerTable,
    EnergyTable,
    FailsafeTable,
    LimitsTable,
    LogTable,
    LoopTable,
    ModeTable,
    SetpointTable,
    SignalsTable,
    SignalTable,
)

_EPOCH = datetime.datetime(1970, 1, 1, tzinfo=datetime.UTC)
_SI = MappingProxyType({"per_update": "J", "per_sample": "J", "idle": "W", "battery": "J", "after": "s"})


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Tables:
    """The valid tables of a loop file; `rules` are already requests."""

    loop: LoopTable
    log: LogTable
    signals: SignalsTable
    controller: ControllerTable | None = None
    limits: LimitsTable | None = None
    accept: AcceptTable | None = None
    channel: ChannelTable | None = None
    failsafe: FailsafeTable | None = None
    energy: EnergyTable | None = None
    approval: ApprovalTable | None = None
    rules: tuple[RuleRequest, ...] = ()


def to_loop(tables: Tables, path: Path) -> Loop:
    """Return the loop the tables describe; `path` is the absolute path of the loop file."""
    controller, limits = tables.controller, tables.limits
    return Loop(
        name=tables.loop.name,
        period=tables.loop.period,
        plant=tables.loop.plant,
        description=tables.loop.description,
        log=_log(tables.log, path.parent),
        signals=_signals(tables.signals),
        controller=ideal_settings(controller, tables.signals.actuator) if controller else None,
        limits=Limits(**limits.model_dump()) if limits else Limits(),
        accept=Accept(**tables.accept.model_dump()) if tables.accept else Accept(),
        channel=Channel(**tables.channel.model_dump()) if tables.channel else None,
        approval=MappingProxyType(tables.approval.model_dump() if tables.approval else {}),
        extras=_extras(tables),
        rules=tables.rules,
        path=path,
    )


def _log(log: LogTable, folder: Path) -> LogSource:
    plain = log.model_dump(exclude={"path", "good", "stale", "exclude"})
    return LogSource(
        paths=tuple(log.path),
        folder=folder,
        good=tuple(log.good),
        stale=tuple(log.stale),
        exclude=tuple(
            Exclusion(start=to_ns(e.from_, log.timezone), end=to_ns(e.to, log.timezone), why=e.why) for e in log.exclude
        ),
        **plain,
    )


def to_ns(moment: datetime.datetime, zone: str | None) -> int:
    """Return a moment in ns since 1970 UTC; one without an offset is on the log's own clock (UTC when not stated)."""
    if moment.tzinfo is None:
        moment = moment.replace(tzinfo=zoneinfo.ZoneInfo(zone or "UTC"))
    return (moment - _EPOCH) // datetime.timedelta(microseconds=1) * 1000


def check_exclusions(log: LogTable) -> Iterator[Fault]:
    """Yield a fault for every stretch of `log.exclude` that ends before it starts."""
    for n, cut in enumerate(log.exclude):
        if to_ns(cut.from_, log.timezone) > to_ns(cut.to, log.timezone):
            own_clock = cut.from_.tzinfo is None or cut.to.tzinfo is None
            yield Fault(
                at=("log", "exclude", n, "to"),
                what=f"log.exclude no. {n + 1} ends before it starts",
                found=f"from {cut.from_.isoformat()} to {cut.to.isoformat()}",
                expected="from before to",
                do="correct one of them",
                reads=(("log", "exclude", n, "from"), *([("log", "timezone")] if own_clock else [])),
            )


def _signals(signals: SignalsTable) -> Signals:
    return Signals(
        measurement=Signal(**_signal(signals.measurement)),
        setpoint=Signal(**_signal(signals.setpoint)),
        actuator=_actuator(signals.actuator),
        disturbances=tuple(Signal(**_signal(signal)) for signal in signals.disturbances),
        mode=_mode(signals.mode) if signals.mode else None,
    )


def _mode(mode: ModeTable) -> Mode:
    return Mode(column=mode.column, automatic=tuple(mode.automatic), time=mode.time)


def _signal(signal: SignalTable | SetpointTable) -> dict[str, Any]:
    low, high = signal.range or (None, None)
    return {"low": low, "high": high, **signal.model_dump(exclude={"range"})}


def _actuator(actuator: ActuatorTable) -> Actuator:
    plain = actuator.model_dump(exclude={"range"})
    if actuator.range is not None:
        plain |= {"low": actuator.range[0], "high": actuator.range[1]}
    return Actuator(**plain)


def _extras(tables: Tables) -> Mapping[str, Mapping[str, Any]]:
    """Keep the tables nothing acts on yet, with quantities in SI and their unit behind the key's name."""
    found = {"failsafe": tables.failsafe, "energy": tables.energy}
    return MappingProxyType(
        {
            name: MappingProxyType({_si_key(key): value for key, value in table.model_dump(exclude_none=True).items()})
            for name, table in found.items()
            if table is not None
        }
    )


def _si_key(key: str) -> str:
    return f"{key}_{_SI[key].lower()}" if key in _SI else key
