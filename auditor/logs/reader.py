"""From the files a loop file names to one `Log`."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Any, TypeVar

import numpy as np
import numpy.typing as npt

from auditor.errors import LogError, Problem, raise_all
from auditor.logs.channels import read_channels
from auditor.logs.files import describe_inputs, expand, kind, label, resolve
from auditor.logs.findings.base import Finding
from auditor.logs.local_clock import CHOICES
from auditor.logs.log import Log
from auditor.logs.long_layout import by_tag, long_columns, needed_rows, of_tag
from auditor.logs.packed import Place
from auditor.logs.parts import Marks, Part, in_order
from auditor.logs.quality import grades, read_codes
from auditor.logs.raw_table import RawTable, Wanted, for_all, wanted_by_clock, wanted_columns
from auditor.logs.read_csv import read_csv
from auditor.logs.read_parquet import read_parquet
from auditor.logs.tidy import tidy
from auditor.logs.timestamps import read_stamps
from auditor.logs.utc import on_utc
from auditor.logs.weave import Strand, woven
from auditor.loop import LogSource, Loop
from auditor.progress import Progress, silent

_STAGE = "read the log"
_LAYOUTS = ("wide", "long")
_NO_CHOICE = {
    "layout": "No such layout of a log.",
    "ambiguous": "No such way to tell the hours of a repeated hour apart.",
}
_Array = TypeVar("_Array", bound=npt.NDArray[Any])


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class _Group:
    """Parts that share a time axis, and the columns to read from them."""

    wanted: Wanted
    parts: Sequence[Part]
    findings: tuple[Finding, ...] = ()


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
    source = loop.log
    _check_stated(source)
    paths = resolve(source)
    places = [place for inside in for_all(lambda path: expand(path, source.folder), paths) for place in inside]
    observe(_STAGE, 0.0)
    groups = _long(places, loop) if source.layout == "long" else _wide(places, loop)
    observe(_STAGE, 0.7)
    read = for_all(lambda group: _strand(group, source), groups)
    observe(_STAGE, 0.9)
    log = _log(woven([strand for strand, _, _ in read], loop.signals.measurement.column))
    found = [finding for group in groups for finding in group.findings]
    found += [finding for _, _, findings in read for finding in findings]
    log = replace(
        log,
        rows=sum(len(strand.time) for strand, _, _ in read),
        inputs=describe_inputs(paths, source.folder),
        zone=next((zone for _, zone, _ in read if zone != "UTC"), "UTC"),
        findings=tuple(dict.fromkeys(found)),
    )
    observe(_STAGE, 1.0)
    return log


def _log(strand: Strand) -> Log:
    return Log(
        time=_sealed(strand.time),
        channels=MappingProxyType({name: _sealed(values) for name, values in strand.channels.items()}),
        texts=MappingProxyType({name: _sealed(words) for name, words in strand.texts.items()}),
        own=MappingProxyType({name: _sealed(rows) for name, rows in strand.own.items()}),
    )


def _sealed(array: _Array) -> _Array:
    """Make an array that nobody else holds read-only, without the copy that `arrays.read_only` has to make."""
    array.flags.writeable = False
    return array


def _wide(places: Sequence[Place], loop: Loop) -> list[_Group]:
    """Read a log with one column per signal, into one group per time column."""
    clocks = wanted_by_clock(loop)
    tables = for_all(lambda wanted: _tables(places, loop.log, wanted), clocks)
    parts = _tidied([table for own in tables for table in own], loop.log)
    groups = [parts[k : k + len(places)] for k in range(0, len(parts), len(places))]
    return [
        _Group(wanted=wanted, parts=in_order(own), findings=_of_files(in_order(own)))
        for wanted, own in zip(clocks, groups, strict=True)
    ]


def _long(places: Sequence[Place], loop: Loop) -> list[_Group]:
    """Read a log with one row per time and tag, into one group per tag."""
    source, signals = loop.log, wanted_columns(loop)
    tables = needed_rows(_tables(places, source, long_columns(source)), source, signals)
    parts = _tidied(tables, source)
    tags = by_tag(parts, signals)
    groups = [_Group(wanted=of_tag(signals, tag), parts=in_order(mine)) for tag, mine in tags.parts.items()]
    return [replace(groups[0], findings=_of_files(parts) + tags.findings), *groups[1:]]


def _of_files(parts: Iterable[Part]) -> tuple[Finding, ...]:
    return tuple(finding for part in parts for finding in part.table.findings)


def _tables(places: Sequence[Place], source: LogSource, wanted: Wanted) -> list[RawTable]:
    return for_all(lambda path: _read_table(path, source, wanted), places)


def _tidied(tables: Sequence[RawTable], source: LogSource) -> list[Part]:
    """Read the stamps of all files, drop what is no row, and grade the rest by quality."""
    stamps = read_stamps(tables, source)
    tidied = for_all(lambda pair: tidy(*pair, source), zip(tables, stamps, strict=True))
    marks = _marks([table for table, _ in tidied], source)
    return [Part(table=table, stamps=stamps, marks=mark) for (table, stamps), mark in zip(tidied, marks, strict=True)]


def _marks(tables: Sequence[RawTable], source: LogSource) -> Sequence[Marks | None]:
    """Say what the codes of all files mean; None without a quality column."""
    read = [read_codes(table.quality) for table in tables if table.quality is not None]
    if not read:
        return [None] * len(tables)
    meaning = grades((word for _, words in read for word in words), source)
    place = {word: code for code, word in enumerate(meaning)}
    grade = np.array([meaning[word] for word in place], dtype=np.uint8)
    common = [np.array([place[word] for word in words], dtype=np.int64)[codes] for codes, words in read]
    return [Marks(codes=codes, words=tuple(place), grades=grade) for codes in common]


def _strand(group: _Group, source: LogSource) -> tuple[Strand, str, tuple[Finding, ...]]:
    """Put a group on UTC and read its cells; also return the clock and the findings."""
    time, zone, findings = on_utc(group.parts, source)
    channels, texts, found = read_channels(group.parts, group.wanted, time)
    strand = Strand(time=time, channels=channels, texts=texts, own={}, mode=group.wanted.mode)
    return strand, zone, findings + found


def _check_stated(source: LogSource) -> None:
    problems = []
    for key, stated, known in (("layout", source.layout, _LAYOUTS), ("ambiguous", source.ambiguous, CHOICES)):
        if stated is not None and stated not in known:
            found, expected = f'"{stated}"', ", ".join(f'"{choice}"' for choice in known)
            problems.append(Problem(what=_NO_CHOICE[key], where=f"[log] {key}", found=found, expected=expected))
    raise_all(LogError, problems)


def _read_table(path: Place, source: LogSource, wanted: Wanted) -> RawTable:
    name = label(path, source.folder)
    if kind(path, name) == "parquet":
        return read_parquet(path, name, wanted)
    return read_csv(path, name, source, wanted)
