"""`RawTable`: the columns a loop needs from one file, cells as they were written; shared by all readers."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TypeVar

import numpy as np
import pyarrow as pa

from auditor.arrays import BoolArray
from auditor.errors import LogError, Problem, raise_all
from auditor.logs.findings.base import Finding
from auditor.loop import Loop
from auditor.text import nearest

_Item = TypeVar("_Item")
_Result = TypeVar("_Result")


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Wanted:
    """The columns a loop needs; `numbers` maps a column to the loop file key that names it, `clock` is the time's."""

    time: str
    numbers: Mapping[str, str]
    mode: str | None = None
    tag: str | None = None
    quality: str | None = None
    clock: str = "log.time"

    def names(self) -> dict[str, str]:
        """Map every column to the loop file key that names it, the time column first."""
        others = {self.mode: "signals.mode", self.tag: "log.tag", self.quality: "log.quality"}
        return {self.time: self.clock} | dict(self.numbers) | {n: key for n, key in others.items() if n is not None}

    def coded(self) -> list[str]:
        """List the columns that hold few different texts, which readers keep as a dictionary where they can."""
        return [name for name in (self.tag, self.quality) if name is not None]

    def columns(self, names: Sequence[str]) -> list[str]:
        """List the columns to read from a file whose own are `names`, each once."""
        mode = [self.mode] if self.mode is not None else []
        return list(dict.fromkeys([*time_columns(self.time, names), *self.numbers, *mode, *self.coded()]))


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class RawTable:
    """One file's needed columns in their recorded order.

    Attributes
    ----------
    label : str
        What the file is called in errors.
    times : tuple of pyarrow.ChunkedArray
        The time column, or a date and a time-of-day column.
    numbers : mapping of str to pyarrow.ChunkedArray
        Number columns by name: text in a text log, any type in Parquet.
    mode, tag, quality : pyarrow.ChunkedArray or None
    decimal : str
        Decimal sign of numbers that are text.
    header : str
        The time column's name as it stands in a text log (to know it again further down); "" in Parquet.
    locate : callable
        Turns a row (0 is the first) into words: "line 17".
    findings : tuple of Finding
        What reading the file noticed.
    """

    label: str
    times: tuple[pa.ChunkedArray, ...]
    numbers: Mapping[str, pa.ChunkedArray]
    mode: pa.ChunkedArray | None
    locate: Callable[[int], str]
    tag: pa.ChunkedArray | None = None
    quality: pa.ChunkedArray | None = None
    decimal: str = "."
    header: str = ""
    findings: tuple[Finding, ...] = ()

    def __len__(self) -> int:
        return len(self.times[0])

    def keep(self, rows: BoolArray) -> RawTable:
        """Return the table with the marked rows only; a row still knows where it stands in the file."""
        kept, mask, locate = np.flatnonzero(rows), pa.array(rows), self.locate
        return replace(
            self,
            times=tuple(column.filter(mask) for column in self.times),
            numbers={name: column.filter(mask) for name, column in self.numbers.items()},
            mode=_filtered(self.mode, mask),
            tag=_filtered(self.tag, mask),
            quality=_filtered(self.quality, mask),
            locate=lambda row: locate(int(kept[row])),
        )


def _filtered(column: pa.ChunkedArray | None, mask: pa.BooleanArray) -> pa.ChunkedArray | None:
    return column if column is None else column.filter(mask)


def wanted_columns(loop: Loop) -> Wanted:
    """List the columns of the log that the loop's signals name."""
    mode = loop.signals.mode
    numbers = {column: key for column, key, _ in _signals(loop)}
    return Wanted(
        time=loop.log.time, numbers=numbers, mode=mode.column if mode is not None else None, quality=loop.log.quality
    )


def wanted_by_clock(loop: Loop) -> list[Wanted]:
    """List the columns that share a time column, for every time column that the loop's signals name."""
    source, mode = loop.log, loop.signals.mode
    groups: dict[str, Wanted] = {}
    for column, key, time in _signals(loop):
        clock = source.time if time is None else time
        named = "log.time" if time is None else f"{key}.time"
        group = groups.get(clock) or Wanted(time=clock, numbers={}, quality=source.quality, clock=named)
        groups[clock] = replace(group, numbers={**group.numbers, column: key})
    if mode is not None:
        clock = source.time if mode.time is None else mode.time
        named = "log.time" if mode.time is None else "signals.mode.time"
        group = groups.get(clock) or Wanted(time=clock, numbers={}, quality=source.quality, clock=named)
        groups[clock] = replace(group, mode=mode.column)
    return list(groups.values())


def _signals(loop: Loop) -> list[tuple[str, str, str | None]]:
    """List column, loop file key and own time column of every signal that is a column, each column once."""
    signals = loop.signals
    roles = [("signals.measurement", signals.measurement), ("signals.setpoint", signals.setpoint)]
    roles += [("signals.actuator", signals.actuator)]
    roles += [(f"signals.disturbances[{k}]", signal) for k, signal in enumerate(signals.disturbances)]
    found: dict[str, tuple[str, str, str | None]] = {}
    for key, signal in roles:
        if signal.column is not None:
            found.setdefault(signal.column, (signal.column, key, signal.time))
    return list(found.values())


def time_columns(time: str, names: Sequence[str]) -> tuple[str, ...]:
    """Return the column(s) that `time` names: itself, or two joined by a plus sign ("date + clock").

    Empty when they are not all among `names`.
    """
    if time in names:
        return (time,)
    parts = tuple(part.strip() for part in time.split("+"))
    return parts if len(parts) == 2 and all(part in names for part in parts) else ()


def column_problems(wanted: Wanted, names: Sequence[str], label: str) -> list[Problem]:
    """List every wanted column that `names` (the file's own) does not have, or has twice."""
    problems = []
    for name, key in wanted.names().items():
        if not (time_columns(name, names) if key == wanted.clock else name in names):
            problems.append(_missing(name, key, names, label, wanted))
        elif names.count(name) > 1:
            what = f'{names.count(name)} columns are called "{name}".'
            problems.append(Problem(what=what, where=label, do="rename them, so that each has its own name"))
    return problems


def _missing(name: str, key: str, names: Sequence[str], label: str, wanted: Wanted) -> Problem:
    shown = ", ".join(f'"{n}"' for n in names[:40]) + (f" and {len(names) - 40} more" if len(names) > 40 else "")
    spare = [n for n in names if n not in wanted.names()]
    close = next((n for n in spare if n.casefold() == name.casefold()), None) or nearest(name, spare)
    if close:
        do = f'did you mean "{close}"?'
    elif key == wanted.clock and "" in names:
        do = 'set time = "" if it is the column without a name'
    else:
        do = f"set {key} to one of the columns found"
    what = f'The log has no column "{name}".'
    return Problem(what=what, where=label, found=f"columns {shown}", expected=f'"{name}", named by {key}', do=do)


def for_all(read: Callable[[_Item], _Result], items: Iterable[_Item]) -> list[_Result]:
    """Apply `read` to every item; the problems of all of them are raised together, alike ones as one.

    Raises
    ------
    LogError
        When `read` raised it for at least one item.
    """
    results: list[_Result] = []
    problems: list[Problem] = []
    for item in items:
        try:
            results.append(read(item))
        except LogError as error:
            problems += error.problems
    raise_all(LogError, merged(problems))
    return results


def merged(problems: Sequence[Problem]) -> list[Problem]:
    """Say a problem that many files share once, with the first file and the number of others."""
    alike: dict[tuple[str, str, str], list[Problem]] = {}
    for problem in problems:
        alike.setdefault((problem.what, problem.expected, problem.do), []).append(problem)
    return [
        replace(group[0], where=f"{group[0].where} and {len(group) - 1} more") if len(group) > 1 else group[0]
        for group in alike.values()
    ]
