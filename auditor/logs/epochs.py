"""Epoch numbers as nanoseconds since 1970, exact to the last written digit."""

from __future__ import annotations

import decimal
import re

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import IntArray
from auditor.errors import LogError, Problem
from auditor.logs.stamp_layouts import IMPOSSIBLE, READ, UNREADABLE

_DIGITS_TO_NANOSECONDS = {"s": 9, "ms": 6, "us": 3, "ns": 0}
_NUMBER = r"[+-]?(\d+([.]\d*)?|[.]\d+)([eE][+-]?\d+)?"
_ANY_NUMBER = re.compile(r"\s*" + _NUMBER.replace("[.]", "[.,]") + r"\s*")
_NOTHING = pa.scalar(None, pa.string())
_PLAUSIBLE_YEARS = (1980, 2100)
_SECONDS_PER_YEAR = 365.2425 * 86400


def is_number(cell: str) -> bool:
    """Tell whether a cell is a plain number, with a point or a comma."""
    return _ANY_NUMBER.fullmatch(cell) is not None


def read_epochs(column: pa.ChunkedArray, unit: str, decimal_sign: str) -> tuple[IntArray, npt.NDArray[np.uint8]]:
    """Turn numbers written as text into nanoseconds since 1970.

    Parameters
    ----------
    column : pyarrow.ChunkedArray of string, length n
    unit : str
        "s", "ms", "us" or "ns".
    decimal_sign : str

    Returns
    -------
    nanoseconds : ndarray of int64, shape (n,)
        0 where the state is not READ.
    state : ndarray of uint8, shape (n,)
        READ, UNREADABLE (no number) or IMPOSSIBLE (beyond the years 1678…2261).

    Raises
    ------
    LogError
        When the unit is none of the four.
    """
    if unit not in _DIGITS_TO_NANOSECONDS:
        expected = ", ".join(_DIGITS_TO_NANOSECONDS)
        raise LogError(
            Problem(what="No such unit of time.", where="[log] time_unit", found=f'"{unit}"', expected=expected)
        )
    text = pc.utf8_trim_whitespace(column)
    text = pc.replace_substring(text, decimal_sign, ".") if decimal_sign != "." else text
    written = pc.fill_null(pc.match_substring_regex(text, f"^{_NUMBER}$"), False)
    scale = _DIGITS_TO_NANOSECONDS[unit]
    low, high = _split(_decimals(pc.if_else(written, text, _NOTHING), scale))
    fits = high == low >> 63
    state = np.where(fits, READ, IMPOSSIBLE)
    state = np.where(np.asarray(written.to_numpy(), dtype=np.bool_), state, UNREADABLE)
    return np.where(state == READ, low, 0), state.astype(np.uint8)


def _decimals(text: pa.ChunkedArray, scale: int) -> pa.ChunkedArray:
    """Read numbers as decimals with `scale` digits after the point: their bare integers are nanoseconds then."""
    kind = pa.decimal128(38, scale)
    try:
        return pc.cast(text, kind)
    except pa.ArrowInvalid:
        # Digits beyond the nanosecond: cut, never rounded up, so that order is kept.
        short = pc.replace_substring_regex(text, rf"([.]\d{{{scale}}})\d+$", r"\1")
    try:
        return pc.cast(short, kind)
    except pa.ArrowInvalid:
        return _one_by_one(short, scale)


def _one_by_one(text: pa.ChunkedArray, scale: int) -> pa.ChunkedArray:
    """Read what the fast way refuses (a small exponent, more than 38 digits); what is far too large becomes largest."""
    limit = decimal.Decimal(10) ** (37 - scale)
    step = decimal.Decimal(1).scaleb(-scale)
    exact = decimal.Context(prec=60, rounding=decimal.ROUND_FLOOR)
    cells = (None if cell is None else decimal.Decimal(cell) for cell in text.to_pylist())
    kept = [None if cell is None else min(max(cell, -limit), limit).quantize(step, context=exact) for cell in cells]
    return pa.chunked_array([pa.array(kept, type=pa.decimal128(38, scale))])


def _split(column: pa.ChunkedArray) -> tuple[IntArray, IntArray]:
    """Return the low and the high half of 128-bit integers, as int64 each."""
    low, high = [], []
    for chunk in column.chunks:
        halves = np.frombuffer(chunk.buffers()[1], dtype="<i8")[2 * chunk.offset : 2 * (chunk.offset + len(chunk))]
        low.append(halves[0::2])
        high.append(halves[1::2])
    return np.concatenate(low), np.concatenate(high)


def unit_unknown(column: pa.ChunkedArray, label: str, decimal_sign: str) -> Problem:
    """Say that numbers came without a unit, and which unit would make dates of them that are plausible."""
    cells = [
        cell.strip().replace(decimal_sign, ".") for cell in column.slice(0, 100).to_pylist() if cell and is_number(cell)
    ]
    first = cells[0]
    years = {unit: _year(float(first), digits) for unit, digits in _DIGITS_TO_NANOSECONDS.items()}
    likely = [u for u, year in years.items() if year is not None and _PLAUSIBLE_YEARS[0] <= year <= _PLAUSIBLE_YEARS[1]]
    if likely:
        do = f'add to [log] the line time_unit = "{likely[0]}": the first row is then in {years[likely[0]]}'
    else:
        do = 'add time_unit = "s", "ms", "us" or "ns" to [log]; a log that counts from 0 then starts in 1970'
    compact = _compact_format(cells)
    if compact:
        do = f'add to [log] the line time_format = "{compact}" if these are dates' + (f", or {do}" if likely else "")
    return Problem(
        what="The time stamps are numbers, and no unit is stated.",
        where=label,
        found=f'"{first}" in the first row',
        expected="time_unit in [log]: the unit in which the numbers count from 1970",
        do=do,
    )


def _year(number: float, digits: int) -> int | None:
    seconds = number * 10.0 ** (digits - 9)
    year = 1970 + seconds / _SECONDS_PER_YEAR
    return int(year) if abs(year) < 10_000 else None


def _compact_format(cells: list[str]) -> str:
    formats = {8: "%Y%m%d", 12: "%Y%m%d%H%M", 14: "%Y%m%d%H%M%S"}
    dates = all(re.fullmatch(r"(19|20)\d\d(0[1-9]|1[0-2])(0[1-9]|[12]\d|3[01])\d*", cell) for cell in cells)
    return formats.get(len(cells[0]), "") if dates else ""
