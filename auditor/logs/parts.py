"""What is left of a file after tidying, and where its rows stand."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, TypeVar, cast

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, IntArray
from auditor.errors import Problem
from auditor.logs.quality import Grade
from auditor.logs.raw_table import RawTable
from auditor.logs.timestamps import Stamps, stamp_text

_Array = TypeVar("_Array", bound=npt.NDArray[Any])


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Marks:
    """The quality of every row: `codes` are places in `words`, of which `grades` says what each means."""

    codes: IntArray
    words: tuple[str, ...]
    grades: npt.NDArray[np.uint8]

    def rows(self, *grades: Grade) -> BoolArray:
        """Return True for the rows whose code means one of `grades`, shape (n,)."""
        return np.asarray(np.isin(self.grades, grades)[self.codes])

    def keep(self, rows: BoolArray) -> Marks:
        """Return the marks of some rows."""
        return replace(self, codes=self.codes[rows])


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Part:
    """One file, or the rows of one tag in it, tidied: every row has a time stamp."""

    table: RawTable
    stamps: Stamps
    marks: Marks | None = None

    def keep(self, rows: BoolArray) -> Part:
        """Return the part with the marked rows only."""
        marks = None if self.marks is None else self.marks.keep(rows)
        return Part(table=self.table.keep(rows), stamps=self.stamps.keep(rows), marks=marks)


def joined(pieces: Sequence[_Array]) -> _Array:
    """Put arrays one after the other."""
    return pieces[0] if len(pieces) == 1 else cast("_Array", np.concatenate(pieces))


def in_order(parts: Sequence[Part]) -> list[Part]:
    """Put files in the order of their first time stamps."""
    return sorted(parts, key=lambda part: int(part.stamps.nanoseconds[0]))


def problem_at(parts: Sequence[Part], rows: IntArray, what: str, expected: str, do: str) -> list[Problem]:
    """Return the problem of some rows of the joined parts, none when there are no such rows."""
    if not len(rows):
        return []
    where, stamp = at(parts, int(rows[0]))
    more = f" and {len(rows) - 1} more" if len(rows) > 1 else ""
    return [Problem(what=what, where=where, found=f'"{stamp}"{more}', expected=expected, do=do)]


def at(parts: Sequence[Part], row: int) -> tuple[str, str]:
    """Return where a row of the joined log is, and its stamp as written."""
    for part in parts:
        if row < len(part.table):
            return f"{part.table.label}, {part.table.locate(row)}", stamp_text(part.table, row)
        row -= len(part.table)
    raise IndexError(row)
