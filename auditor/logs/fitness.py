"""What makes a log or a record unfit: columns, stamps and period (the caller's to mend), too little to learn from."""

from __future__ import annotations

from collections.abc import Mapping

from auditor.arrays import IntArray
from auditor.errors import CannotAnswerError, Problem, raise_all
from auditor.logs.findings.base import Finding
from auditor.logs.findings.constant_actuator import never_moves
from auditor.logs.findings.wording import moment
from auditor.logs.grid import typical_spacing
from auditor.logs.log import Log
from auditor.logs.record import Record
from auditor.loop import Loop, Signal
from auditor.text import duration, nearest, number

FEWEST_SAMPLES = 200
"""Usable samples below which no question about a loop can be answered."""

_MOST_ROWS_APART = 50
_MOST_EMPTY = 200
_LARGE = 20_000_000
_BUMP = "change the setpoint by a few times the noise, or give the actuator a bump, in automatic, and log on"
_SENSOR = "check the sensor and the column; log the measurement with its full resolution while the loop runs"


def roles_of(loop: Loop) -> Mapping[str, Signal]:
    """Return the three signals every loop has."""
    signals = loop.signals
    return {"measurement": signals.measurement, "setpoint": signals.setpoint, "actuator": signals.actuator}


def column_problems(log: Log, loop: Loop) -> list[Problem]:
    """Return what makes the log unfit before anything is looked at: columns that are not there, no rows."""
    roles = [(f"signals.{role}", s.column) for role, s in roles_of(loop).items()]
    roles += [(f"signals.disturbances[{i}]", s.column) for i, s in enumerate(loop.signals.disturbances)]
    problems = [_missing(where, name, log) for where, name in roles if name is not None and name not in log.channels]
    mode = loop.signals.mode
    if mode is not None and mode.column not in log.texts and mode.column not in log.channels:
        problems.append(_missing("signals.mode", mode.column, log))
    if len(log.time) == 0:
        problems.append(Problem(what="the log has no rows", expected="rows with time stamps", do="check [log] path"))
    return problems


def _missing(where: str, name: str, log: Log) -> Problem:
    """Say that a column is not there, and which one is nearest."""
    known = sorted({*log.channels, *log.texts})
    close = nearest(name, known)
    return Problem(
        what=f'the log has no column "{name}"',
        where=where,
        found=", ".join(known) or "no columns",
        expected="a column of the log",
        do=f'use "{close}"' if close else "name one of these columns",
    )


def period_problems(stamps: IntArray, beats: IntArray, period: float) -> list[Problem]:
    """Return why the base period cannot be the one this log was recorded at."""
    if len(stamps) < 2:
        return [
            Problem(what="the log has fewer than two different stamps", found=str(len(stamps)), do="check [log] time")
        ]
    length, step = float(stamps[-1] - stamps[0]) / 1e9, typical_spacing(beats)
    found = f"rows every {duration(step)} over {duration(length)}, period {duration(period)}"
    if not 0 < period <= length or period < step / _MOST_ROWS_APART:
        return [
            Problem(
                what="the period does not fit the stamps of the log",
                where="loop.period",
                found=found,
                expected=f"{duration(step / _MOST_ROWS_APART)} (a fiftieth of the log's step) to {duration(length)}",
                do="state the period at which the controller ran, with its unit; check [log] time_unit",
            )
        ]
    if length / period > max(_LARGE, _MOST_EMPTY * len(stamps)):
        return [
            Problem(
                what="nearly all of the time between the first and the last stamp has no rows",
                where="[log]",
                found=f"{found}: {length / period:.3g} instants for {len(stamps)} stamps",
                expected=f"at most {_MOST_EMPTY} instants per stamp",
                do="take out rows with a wrong date, or audit the parts one by one",
            )
        ]
    return []


def require_usable(record: Record) -> None:
    """Refuse a record that cannot answer anything.

    Raises
    ------
    CannotAnswerError
        When fewer than 200 valid samples are inside spans, or the actuator or the measurement never moves there.
    """
    usable = record.in_span & record.valid
    count = int(usable.sum())
    problems = []
    manual = next((f for f in record.findings if f.kind == "manual" and f.weight == "stops the answer"), None)
    if manual is not None:
        problems.append(_never_automatic(manual))
    elif count < FEWEST_SAMPLES:
        problems.append(_too_short(record, count))
    elif never_moves(record.u[usable]):
        problems.append(_standing_still(record, "actuator", float(record.u[usable][0]), _BUMP))
    if count >= FEWEST_SAMPLES and never_moves(record.y[usable]):
        problems.append(_standing_still(record, "measurement", float(record.y[usable][0]), _SENSOR))
    raise_all(CannotAnswerError, problems)


def _never_automatic(manual: Finding) -> Problem:
    """Say which modes the log holds instead of automatic."""
    return Problem(
        what="no sample of the log is in automatic",
        where="signals.mode.automatic",
        found=manual.detail,
        expected="values that the mode column holds while the loop is in automatic",
        do="state them as the log writes them, capital letters too; leave [signals.mode] out if it is always automatic",
    )


def _too_short(record: Record, count: int) -> Problem:
    """Say how little is left and where the rest went."""
    lost = ", ".join(f"{cause} {number(hours)} h" for cause, hours in record.lost_hours.items())
    return Problem(
        what="the log holds too few usable samples",
        where=f"{moment(record.start)} to {moment(int(record.time_ns(len(record) - 1)))}",
        found=f"{count} of {len(record)} samples usable" + (f"; lost: {lost}" if lost else ""),
        expected=f"at least {FEWEST_SAMPLES} samples with measurement, setpoint and actuator, in automatic",
        do=f"log at least {duration(FEWEST_SAMPLES * record.period)} more; `auditor check` lists what was lost and why",
    )


def _standing_still(record: Record, role: str, level: float, do: str) -> Problem:
    """Say that a signal has one value only."""
    return Problem(
        what=f"the {role} never moves in the usable part of the log",
        where=f"signals.{role}",
        found=f"{level:g} at every usable sample, {len(record.spans)} spans",
        expected=f"a {role} that moves while the loop runs in automatic",
        do=do,
    )
