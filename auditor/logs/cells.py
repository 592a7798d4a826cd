"""Cells as numbers, and what stands in number columns without being one.

An empty cell, and the words nan and null, are no number and nothing is said about them. Any other text ("Bad",
"Scan Timeout") is no number either, but it is kept as text and counted: it tells why there is no number.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, FloatArray
from auditor.errors import LogError, Problem
from auditor.logs.raw_table import RawTable

TextArray: TypeAlias = npt.NDArray[Any]

_NUMBER = r"^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$"
_GROUPED = r"^[+-]?\d[\d.,'’\s\x{00a0}\x{202f}]*\d$"
_BLANKS = pa.array(["", "nan", "null"])
_NOTHING = pa.scalar(None, pa.string())
_INFINITE = {np.inf: "inf", -np.inf: "-inf"}
_SHOWN = 5


def read_numbers(column: pa.ChunkedArray, table: RawTable, name: str) -> tuple[FloatArray, TextArray | None]:
    """Read a number column of one file.

    Parameters
    ----------
    column : pyarrow.ChunkedArray, length n
        Text, or any type that has a value as a number.
    table : RawTable
        The file, for its decimal sign and for errors.
    name : str
        The column's name, for errors.

    Returns
    -------
    numbers : ndarray, shape (n,)
        NaN where the cell is empty or no number.
    texts : ndarray of object, shape (n,), or None
        The cell's text where it is neither a number nor empty, else None; None as a whole when there is no such cell.

    Raises
    ------
    LogError
        When the column's type has no value as a number, or when a cell is a number written with digit groups or
        with another decimal sign.
    """
    if pa.types.is_string(column.type) or pa.types.is_large_string(column.type):
        return _from_text(column, table, name)
    kind = column.type
    if pa.types.is_temporal(kind) or not (
        pa.types.is_primitive(kind) or pa.types.is_decimal(kind) or pa.types.is_null(kind)
    ):
        problem = Problem(
            what=f'Column "{name}" holds no numbers.',
            where=table.label,
            found=f"values of type {kind}",
            expected="numbers",
            do="name another column, or write this one as numbers",
        )
        raise LogError(problem)
    return _finite(_as_floats(column))


def _as_floats(column: pa.ChunkedArray) -> FloatArray:
    if pa.types.is_boolean(column.type):
        column = pc.cast(column, pa.int8())
    floats = pc.cast(column, pa.float64(), safe=False)
    return np.asarray(pc.fill_null(floats, np.nan).to_numpy(), dtype=np.float64)


def _finite(numbers: FloatArray) -> tuple[FloatArray, TextArray | None]:
    """Take infinite numbers out: they say what became of a calculation, not what was measured."""
    infinite = np.isinf(numbers)
    if not infinite.any():
        return numbers, None
    texts = np.full(len(numbers), None, dtype=object)
    for value, word in _INFINITE.items():
        texts[numbers == value] = word
    return np.where(infinite, np.nan, numbers), texts


def _from_text(column: pa.ChunkedArray, table: RawTable, name: str) -> tuple[FloatArray, TextArray | None]:
    if table.decimal == "," and _any(pc.match_substring(column, ".")):
        return _cell_by_cell(column, table, name)
    try:
        floats = pc.cast(_with_point(column, table.decimal), pa.float64())
    except pa.ArrowInvalid:
        return _cell_by_cell(column, table, name)
    return _finite(np.asarray(pc.fill_null(floats, np.nan).to_numpy(), dtype=np.float64))


def _with_point(column: pa.ChunkedArray, decimal: str) -> pa.ChunkedArray:
    return column if decimal == "." else pc.replace_substring(column, decimal, ".")


def _cell_by_cell(column: pa.ChunkedArray, table: RawTable, name: str) -> tuple[FloatArray, TextArray | None]:
    cells = pc.utf8_trim_whitespace(pc.fill_null(column, ""))
    is_number = pc.match_substring_regex(cells, _NUMBER.replace(r"\.", f"[{table.decimal}]"))
    is_text = pc.invert(pc.or_(is_number, pc.is_in(pc.utf8_lower(cells), value_set=_BLANKS)))
    grouped = _mask(pc.and_(is_text, pc.match_substring_regex(cells, _GROUPED)))
    if grouped.any():
        raise LogError(_grouped(int(np.argmax(grouped)), int(grouped.sum()), cells, table, name))
    written = pc.if_else(is_number, _with_point(cells, table.decimal), _NOTHING)
    numbers = np.asarray(pc.fill_null(pc.cast(written, pa.float64()), np.nan).to_numpy(), dtype=np.float64)
    rows = np.flatnonzero(_mask(is_text))
    if not len(rows):
        return numbers, None
    texts = np.full(len(numbers), None, dtype=object)
    texts[rows] = cells.take(pa.array(rows)).to_pylist()
    return numbers, texts


def _any(mask: pa.ChunkedArray) -> bool:
    return bool(pc.any(mask).as_py())


def _mask(mask: pa.ChunkedArray) -> BoolArray:
    return np.asarray(mask.to_numpy(), dtype=np.bool_)


def _grouped(row: int, count: int, cells: pa.ChunkedArray, table: RawTable, name: str) -> Problem:
    more = f" and in {count - 1} more cells" if count > 1 else ""
    other = "," if table.decimal == "." else "."
    return Problem(
        what=f'Column "{name}" holds numbers with digit groups or with another decimal sign.',
        where=f"{table.label}, {table.locate(row)}",
        found=f'"{cells[row].as_py()}"{more}',
        expected=f'numbers with "{table.decimal}" as decimal sign and nothing between the digits',
        do=f'set decimal = "{other}" in [log] if that is the decimal sign; otherwise export without digit groups',
    )


def read_mode(column: pa.ChunkedArray) -> TextArray:
    """Read a column as words, "" where a cell is empty; whole numbers are written without a point.

    Parameters
    ----------
    column : pyarrow.ChunkedArray, length n

    Returns
    -------
    ndarray of object, shape (n,)
    """
    words = plain_words(column)
    coded = pc.dictionary_encode(words).unify_dictionaries()
    pieces = [np.array(chunk.dictionary.to_pylist(), dtype=object)[chunk.indices.to_numpy()] for chunk in coded.chunks]
    return np.concatenate(pieces)


def plain_words(column: pa.ChunkedArray) -> pa.ChunkedArray:
    """Return a column as text without outer blanks, "" where a cell is empty, whole numbers without a point."""
    if pa.types.is_floating(column.type) and _whole(column):
        column = pc.cast(column, pa.int64())
    return pc.utf8_trim_whitespace(pc.fill_null(pc.cast(column, pa.string()), ""))


def _whole(column: pa.ChunkedArray) -> bool:
    """Tell whether floats are whole numbers throughout, as codes with a missing cell among them often are stored."""
    known = column.drop_null().to_numpy()
    return bool(np.all(np.isfinite(known) & (known == np.floor(known)) & (np.abs(known) < 2**53)))


def shown_counts(texts: TextArray) -> str:
    """Count each text, most frequent first: ``340 × "Bad", 2 × "Scan Timeout"``."""
    return shown_tally(Counter(texts.tolist()))


def shown_tally(tally: Mapping[str, int]) -> str:
    """Tell counted texts, most frequent first."""
    counts = sorted(tally.items(), key=lambda item: (-item[1], item[0]))
    shown = ", ".join(f'{count} × "{text[:40]}"' for text, count in counts[:_SHOWN])
    rest = sum(count for _, count in counts[_SHOWN:])
    return shown + (f", {rest} × {len(counts) - _SHOWN} other texts" if rest else "")
