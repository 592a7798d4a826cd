"""From the files a loop file names to one `Log`."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import Any, TypeVar, cast

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.errors import LogError, Problem, raise_all
from auditor.logs.cells import TextArray, read_mode, read_numbers, shown_counts
from auditor.logs.files import describe_inputs, kind, label, resolve
from auditor.logs.findings.base import Finding
from auditor.logs.local_clock import CHOICES, find_zone, to_utc
from auditor.logs.log import Log
from auditor.logs.raw_table import RawTable, Wanted, for_all, merged, wanted_columns
from auditor.logs.read_csv import read_csv
from auditor.logs.read_parquet import read_parquet
from auditor.logs.tidy import tidy
from auditor.logs.timestamps import Stamps, ends_a_month, read_stamps, stamp_text
from auditor.loop import LogSource, Loop
from auditor.progress import Progress, silent

_STAGE = "read the log"
_Array = TypeVar("_Array", bound=npt.NDArray[Any])


@dataclass(frozen=True, eq=False, slots=True)
class _Part:
    """One file, tidied: every row has a time stamp."""

    table: RawTable
    stamps: Stamps


def read_log(loop: Loop, observe: Progress = silent) -> Log:
    """Read every file of a loop's log, and only the columns that its signals name.

    Files follow each other in the order of their first time stamps; rows keep their order within a file.

    Parameters
    ----------
    loop : Loop
    observe : Progress, optional
        Told how much of the reading is done.

    Raises
    ------
    LogError
        When a file cannot be used, when a column is missing, when a time stamp cannot be read or cannot be put on
        UTC, or when a number column holds mostly text. The problems of one stage are raised together.
    """
    source, wanted = loop.log, wanted_columns(loop)
    _check_stated(source)
    paths = resolve(source)
    observe(_STAGE, 0.0)
    tables = for_all(lambda path: _read_table(path, source, wanted), paths)
    observe(_STAGE, 0.5)
    stamps = read_stamps(tables, source)
    parts = for_all(lambda pair: _Part(*tidy(*pair, source)), zip(tables, stamps, strict=True))
    parts = sorted(parts, key=lambda part: int(part.stamps.nanoseconds[0]))
    time, zone, findings = _on_utc(parts, source)
    observe(_STAGE, 0.7)
    channels, texts, found = _channels(parts, wanted, time)
    observe(_STAGE, 0.9)
    log = Log(
        time=_sealed(time),
        channels=MappingProxyType({name: _sealed(values) for name, values in channels.items()}),
        texts=MappingProxyType({name: _sealed(words) for name, words in texts.items()}),
        rows=len(time),
        inputs=describe_inputs(paths, source.folder),
        zone=zone,
        findings=tuple(finding for part in parts for finding in part.table.findings) + findings + found,
    )
    observe(_STAGE, 1.0)
    return log


def _sealed(array: _Array) -> _Array:
    """Make an array that nobody else holds read-only, without the copy that `arrays.read_only` has to make."""
    array.flags.writeable = False
    return array


def _joined(pieces: Sequence[_Array]) -> _Array:
    return pieces[0] if len(pieces) == 1 else cast("_Array", np.concatenate(pieces))


def _check_stated(source: LogSource) -> None:
    problems = []
    if source.layout != "wide":
        problem = Problem(
            what=f'Logs with layout = "{source.layout}" are not read: only one column per signal is.',
            where="[log] layout",
            found=f'"{source.layout}"',
            expected='"wide"',
            do="turn the log into one row per time and one column per tag, or export it that way",
        )
        problems.append(problem)
    if source.ambiguous not in (None, *CHOICES):
        found, expected = f'"{source.ambiguous}"', ", ".join(f'"{choice}"' for choice in CHOICES)
        what = "No such way to tell the hours of a repeated hour apart."
        problems.append(Problem(what=what, where="[log] ambiguous", found=found, expected=expected))
    raise_all(LogError, problems)


def _read_table(path: Path, source: LogSource, wanted: Wanted) -> RawTable:
    name = label(path, source.folder)
    if kind(path, name) == "parquet":
        return read_parquet(path, name, wanted)
    return read_csv(path, name, source, wanted)


def _on_utc(parts: Sequence[_Part], source: LogSource) -> tuple[IntArray, str, tuple[Finding, ...]]:
    """Join the time columns and put local stamps on UTC."""
    time = _joined([part.stamps.nanoseconds for part in parts])
    local = _joined([part.stamps.local for part in parts])
    leap = _joined([part.stamps.leap for part in parts])
    findings: tuple[Finding, ...] = ()
    problems: list[Problem] = []
    if local.any():
        if source.timezone is None:
            raise LogError(_no_zone(parts, local))
        rows = np.flatnonzero(local)
        placed = to_utc(time[rows], find_zone(source.timezone), source.ambiguous or "order")
        time = placed.utc if local.all() else _replaced(time, rows, placed.utc)
        problems += _clock_problems(parts, rows[placed.missing], rows[placed.tangled], source.timezone)
        findings = _one_pass(time[rows[placed.assumed]])
    leaps = np.flatnonzero(leap)
    wrong_leaps = leaps[~ends_a_month(time[leaps])]
    problems += _problem_at(parts, wrong_leaps, "A second 60 stands where no leap second can be.", *_LEAP)
    raise_all(LogError, problems)
    return time, source.timezone if local.any() and source.timezone else "UTC", findings


def _replaced(time: IntArray, rows: IntArray, values: IntArray) -> IntArray:
    time = time.copy()
    time[rows] = values
    return time


_LEAP = ("23:59:60 UTC on the last day of a month", "correct the stamps that name second 60")


def _no_zone(parts: Sequence[_Part], local: BoolArray) -> Problem:
    where, stamp = _at(parts, int(np.argmax(local)))
    return Problem(
        what="The time stamps are local, and no time zone is stated.",
        where=where,
        found=f'"{stamp}", without an offset from UTC',
        expected="timezone in [log]: the zone of the clock that wrote the log",
        do='add to [log] a line like timezone = "Europe/Amsterdam", or timezone = "UTC"',
    )


def _clock_problems(parts: Sequence[_Part], missing: IntArray, tangled: IntArray, zone: str) -> list[Problem]:
    skipped = f"A local time does not exist: clocks in {zone} skipped it."
    no_order = "The order of the rows does not tell the first pass of the repeated hour from the second."
    return [
        *_problem_at(
            parts,
            missing,
            skipped,
            f"stamps of a clock that follows {zone}",
            'name the zone the clock follows; one without summer time is timezone = "Etc/GMT-1" for UTC+1',
        ),
        *_problem_at(
            parts,
            tangled,
            no_order,
            "stamps that step back once",
            'set ambiguous = "first" or "second" in [log], or export the log in UTC',
        ),
    ]


def _problem_at(parts: Sequence[_Part], rows: IntArray, what: str, expected: str, do: str) -> list[Problem]:
    if not len(rows):
        return []
    where, stamp = _at(parts, int(rows[0]))
    more = f" and {len(rows) - 1} more" if len(rows) > 1 else ""
    return [Problem(what=what, where=where, found=f'"{stamp}"{more}', expected=expected, do=do)]


def _at(parts: Sequence[_Part], row: int) -> tuple[str, str]:
    """Return where a row of the joined log is, and its stamp as written."""
    for part in parts:
        if row < len(part.table):
            return f"{part.table.label}, {part.table.locate(row)}", stamp_text(part.table, row)
        row -= len(part.table)
    raise IndexError(row)


def _one_pass(times: IntArray) -> tuple[Finding, ...]:
    if not len(times):
        return ()
    detail = "one pass only of an hour that the local clock repeats"
    effect = "taken for the pass that its neighbours join, the first where neither does; ambiguous in [log] decides"
    start, end = int(times.min()), int(times.max())
    return (Finding(kind="repeated-hour", start=start, end=end, count=len(times), detail=detail, effect=effect),)


def _channels(
    parts: Sequence[_Part], wanted: Wanted, time: IntArray
) -> tuple[dict[str, FloatArray], dict[str, TextArray], tuple[Finding, ...]]:
    channels: dict[str, FloatArray] = {}
    texts: dict[str, TextArray] = {}
    findings: list[Finding] = []
    problems: list[Problem] = []
    for name in wanted.numbers:
        try:
            channels[name], words = _channel(parts, name)
        except LogError as error:
            problems += error.problems
            continue
        if words is not None:
            texts[name] = words
            findings.append(_text_states(name, words, time))
    raise_all(LogError, merged(problems))
    if wanted.mode is not None:
        texts[wanted.mode] = _joined([read_mode(part.table.mode) for part in parts])
    return channels, texts, tuple(findings)


def _channel(parts: Sequence[_Part], name: str) -> tuple[FloatArray, TextArray | None]:
    read = for_all(lambda part: read_numbers(part.table.numbers[name], part.table, name), parts)
    numbers = _joined([values for values, _ in read])
    if all(words is None for _, words in read):
        return numbers, None
    texts = _joined([np.full(len(v), None, dtype=object) if w is None else w for v, w in read])
    rows = np.flatnonzero(texts != None)  # noqa: E711 - elementwise
    filled = len(rows) + int(np.isfinite(numbers).sum())
    if len(rows) > filled // 2:
        raise LogError(_mostly_text(parts, name, texts[rows], int(rows[0]), filled))
    return numbers, texts


def _mostly_text(parts: Sequence[_Part], name: str, words: TextArray, first: int, filled: int) -> Problem:
    return Problem(
        what=f'Column "{name}" is mostly text: {len(words)} of {filled} filled cells are no numbers.',
        where=_at(parts, first)[0],
        found=shown_counts(words),
        expected="numbers",
        do="name another column; if these are numbers with a unit or a sign behind them, export them without",
    )


def _text_states(name: str, texts: TextArray, time: IntArray) -> Finding:
    rows = texts != None  # noqa: E711 - elementwise
    times = time[rows]
    return Finding(
        kind="text-state",
        start=int(times.min()),
        end=int(times.max()),
        count=len(times),
        detail=shown_counts(texts[rows]),
        effect="no number there; the text is kept",
        signal=name,
    )
