"""From text cells to numbers: one `Column` per column of the log, over all parts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, FloatArray, read_only
from auditor.draft.peek import Peek
from auditor.draft.words import is_unit, unit_of

LEAST_SHARE = 0.7
LEAST_CELLS = 10
MOST_STATES = 12
LARGEST = 1e60

_NUMBER = r"^[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?$"


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Column:
    """One column of the log.

    Attributes
    ----------
    name, unit : str
        As the log writes them; the unit is empty when none is stated.
    cells : pyarrow.ChunkedArray
        The cells as recorded, over all parts.
    numbers : ndarray, shape (rows,)
        NaN where the cell is empty or not a number.
    filled : float
        Share of cells that are not empty.
    numeric : float
        Share of the filled cells that are numbers.
    """

    name: str
    unit: str
    cells: pa.ChunkedArray
    numbers: FloatArray
    filled: float
    numeric: float

    @property
    def is_number(self) -> bool:
        """True for a column of numbers; a few text states do not matter."""
        enough = np.count_nonzero(np.isfinite(self.numbers)) >= min(LEAST_CELLS, len(self.numbers))
        return self.numeric >= LEAST_SHARE and bool(enough)

    @property
    def constant(self) -> bool:
        """True when every number is the same."""
        return bool(np.nanmax(self.numbers) == np.nanmin(self.numbers)) if self.is_number else False

    def states(self) -> list[str]:
        """Return the distinct cells as text, the most frequent first; empty when there are too many to be states."""
        counted = pc.value_counts(pc.drop_null(self.cells)).to_pylist()
        if not 1 <= len(counted) <= MOST_STATES:
            return []
        ordered = sorted(counted, key=lambda pair: (-pair["counts"], str(pair["values"])))
        return [str(pair["values"]) for pair in ordered]


def columns_of(peek: Peek) -> tuple[Column, ...]:
    """Return the columns of all parts put behind each other."""
    table = pa.concat_tables(peek.parts, promote_options="permissive")
    comma = peek.dress is not None and peek.dress.decimal == ","
    return tuple(
        _column(name, unit, _spelled_out(table.column(n)), comma)
        for n, (name, unit) in enumerate(zip(peek.names, peek.units, strict=True))
    )


def _spelled_out(cells: pa.ChunkedArray) -> pa.ChunkedArray:
    """Return the texts themselves where a column holds numbers of texts."""
    return cells.cast(cells.type.value_type) if pa.types.is_dictionary(cells.type) else cells


def part_starts(peek: Peek) -> BoolArray:
    """Return True at the first row of each part, shape (rows,)."""
    first = np.zeros(sum(part.num_rows for part in peek.parts), dtype=np.bool_)
    ends = np.cumsum([0, *(part.num_rows for part in peek.parts[:-1])])
    first[ends] = True
    return read_only(first)


def _column(name: str, line_unit: str, cells: pa.ChunkedArray, comma: bool) -> Column:
    numbers = numbers_of(cells, comma)
    filled = len(cells) - cells.null_count
    unit = line_unit.strip().strip("[](){}").strip() if is_unit(line_unit) else unit_of(name)
    return Column(
        name=name,
        unit="" if unit == "-" else unit,
        cells=cells,
        numbers=read_only(numbers),
        filled=filled / max(len(cells), 1),
        numeric=float(np.count_nonzero(np.isfinite(numbers))) / max(filled, 1),
    )


def numbers_of(cells: pa.ChunkedArray, comma: bool) -> FloatArray:
    """Return the cells as numbers, NaN where they are none (or beyond `LARGEST`, which no signal is).

    Parameters
    ----------
    cells : pyarrow.ChunkedArray, length rows
    comma : bool
        True when a comma is the decimal sign.
    """
    if pa.types.is_floating(cells.type) or pa.types.is_integer(cells.type) or pa.types.is_decimal(cells.type):
        numbers = cells.cast(pa.float64())
    elif pa.types.is_string(cells.type) or pa.types.is_large_string(cells.type):
        numbers = _from_text(pc.utf8_trim_whitespace(cells), comma)
    else:
        return np.full(len(cells), np.nan)
    found = np.asarray(numbers.to_numpy(), dtype=np.float64)
    return np.where(np.abs(found) <= LARGEST, found, np.nan)


def _from_text(text: pa.ChunkedArray, comma: bool) -> pa.ChunkedArray:
    if comma:
        text = pc.replace_substring(text, ",", ".")
    try:
        return text.cast(pa.float64())
    except pa.ArrowInvalid:
        return pc.if_else(pc.match_substring_regex(text, _NUMBER), text, None).cast(pa.float64())
