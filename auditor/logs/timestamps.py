"""Time columns of every kind as nanoseconds since 1970.

Text follows RFC 3339 (with lower-case letters, second 60 and any offset), the parts of ISO 8601 that leave no doubt,
or the stated `time_format`; numbers are epochs in the stated `time_unit`; typed columns say themselves what they are.
A day of 24:00:00 is the next day's beginning. Fractions finer than a nanosecond are cut.
A leap second is the last nanosecond of its minute: after everything in second 59, before the next minute.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, IntArray
from auditor.errors import LogError, Problem
from auditor.logs.epochs import is_number, read_epochs, unit_unknown
from auditor.logs.raw_table import RawTable
from auditor.logs.stamp_layouts import IMPOSSIBLE, NO_OFFSET, READ, SECOND, UNREADABLE, Fields, read_fields
from auditor.logs.stamp_patterns import FOUND_BY_LOOKING, formats_for, from_format
from auditor.loop import LogSource

DAY = 86400 * SECOND
_FIRST_YEAR, _LAST_YEAR = 1678, 2261  # what int64 nanoseconds since 1970 can hold in full
_MONTHS = np.arange(f"{_FIRST_YEAR}-01", f"{_LAST_YEAR + 1}-02", dtype="datetime64[M]")
_MONTH_STARTS: IntArray = _MONTHS.astype("datetime64[D]").astype(np.int64)
_BLOCK = 16_384  # rows at a time: their dates stay in the processor's cache
_LOOKED_AT = 100
_NANOSECONDS = {"s": SECOND, "ms": SECOND // 1000, "us": 1000, "ns": 1}
_ZONED_LENGTH, _LOCAL_LENGTH, _DATE_LENGTH = 20, 16, 10


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Stamps:
    """A time column, each array of shape (n,).

    Attributes
    ----------
    nanoseconds : ndarray of int64
        Since 1970 UTC, or since 1970 on the log's own clock where `local`; 0 where `state` is not READ.
    local : ndarray of bool
        Where the stamp has no offset and the log's zone is needed.
    state : ndarray of uint8
        READ, UNREADABLE or IMPOSSIBLE.
    leap : ndarray of bool
        Where the second is 60.
    """

    nanoseconds: IntArray
    local: BoolArray
    state: npt.NDArray[np.uint8]
    leap: BoolArray

    def keep(self, rows: BoolArray) -> Stamps:
        """Return the stamps of some rows."""
        return Stamps(
            nanoseconds=self.nanoseconds[rows], local=self.local[rows], state=self.state[rows], leap=self.leap[rows]
        )


def read_stamps(tables: Sequence[RawTable], source: LogSource) -> tuple[Stamps, ...]:
    """Read the time column(s) of all files of a log.

    All files are looked at together, because one of them may settle which of two numbers is the day.

    Raises
    ------
    LogError
        When `time_format` is none, when numbers come without `time_unit`, when a column can be no time, or when
        nothing in the log settles whether day or month comes first.
    """
    read = [_read(table, source) for table in tables]
    day_first = _day_first(tables, [fields for fields in read if isinstance(fields, Fields)], read)
    return tuple(_assemble(item, day_first) if isinstance(item, Fields) else item for item in read)


def _read(table: RawTable, source: LogSource) -> Stamps | Fields:
    column = table.times[0] if len(table.times) == 1 else _joined(table)
    kind = column.type
    if pa.types.is_timestamp(kind) or pa.types.is_date(kind):
        return _typed(column)
    if pa.types.is_string(kind) or pa.types.is_large_string(kind):
        return _text(column, table, source)
    if not (pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_decimal(kind)):
        problem = Problem(
            what="The time column holds no times.",
            where=table.label,
            found=f"values of type {kind}",
            expected="time stamps, dates, texts or epoch numbers",
            do="set [log] time to another column",
        )
        raise LogError(problem)
    return _text(pc.cast(column, pa.string()), table, source)


def _joined(table: RawTable) -> pa.ChunkedArray:
    """Put a date column and a clock column together as one text."""
    date, clock = (_as_text(column) for column in table.times)
    return pc.binary_join_element_wise(date, clock, " ", null_handling="emit_null")


def _as_text(column: pa.ChunkedArray) -> pa.ChunkedArray:
    if pa.types.is_timestamp(column.type):
        # A date that a data frame stored as midnight; only its date is wanted beside a clock.
        column = pc.cast(column, pa.date32(), safe=False)
    return pc.utf8_trim_whitespace(pc.cast(column, pa.string()))


def _typed(column: pa.ChunkedArray) -> Stamps:
    if pa.types.is_date(column.type):
        column = pc.cast(column, pa.timestamp("ms"))
    size = _NANOSECONDS[column.type.unit]
    counts = pc.cast(column, pa.int64())
    known = np.asarray(pc.is_valid(counts).to_numpy(), dtype=np.bool_)
    number = pc.fill_null(counts, 0).to_numpy()
    within = np.abs(number) <= np.iinfo(np.int64).max // size
    stamps = _all_read(np.where(within, number, 0) * size, local=column.type.tz is None)
    state = np.where(known, np.where(within, READ, IMPOSSIBLE), UNREADABLE)
    return replace(stamps, state=state.astype(np.uint8))


def _text(column: pa.ChunkedArray, table: RawTable, source: LogSource) -> Stamps | Fields:
    if source.time_format is not None:
        return read_fields(column, (from_format(source.time_format),))
    if source.time_unit is None and not _looks_like_number(column):
        return _plain_iso(column) or read_fields(column, FOUND_BY_LOOKING)
    if source.time_unit is None:
        raise LogError(unit_unknown(column, table.label, table.decimal))
    whole, state = read_epochs(column, source.time_unit, table.decimal)
    nothing = np.zeros(len(whole), dtype=np.bool_)
    return Stamps(nanoseconds=whole, local=nothing, state=state, leap=nothing)


def _plain_iso(column: pa.ChunkedArray) -> Stamps | None:
    """Read a column that follows ISO 8601 plainly throughout; None when anything in it needs a closer look.

    The lengths asked for keep out an hour without minutes, which the closer look does not take for a time either.
    """
    shortest, longest = pc.min_max(pc.binary_length(column)).as_py().values()
    if column.null_count or shortest is None:
        return None
    zoned = column[0].as_py()[-6:].lstrip("0123456789:.")[:1] in ("Z", "+", "-") and longest > _DATE_LENGTH
    if shortest < (_ZONED_LENGTH if zoned else _LOCAL_LENGTH) and not shortest == longest == _DATE_LENGTH:
        return None
    try:
        whole = pc.cast(pc.cast(column, pa.timestamp("ns", "UTC" if zoned else None)), pa.int64())
    except pa.ArrowInvalid:
        return None
    return _all_read(whole.to_numpy(), local=not zoned)


def _all_read(whole: IntArray, local: bool) -> Stamps:
    n = len(whole)
    return Stamps(
        nanoseconds=whole,
        local=np.full(n, local),
        state=np.full(n, READ, dtype=np.uint8),
        leap=np.zeros(n, dtype=np.bool_),
    )


def _looks_like_number(column: pa.ChunkedArray) -> bool:
    cells = [cell for cell in column.slice(0, _LOOKED_AT).to_pylist() if cell]
    return sum(is_number(cell) for cell in cells) > len(cells) // 2


def _day_first(tables: Sequence[RawTable], unsettled: Sequence[Fields], read: Sequence[Stamps | Fields]) -> bool:
    """Tell whether the day comes first in dates that leave it open, from days above 12 anywhere in the log."""
    open_rows = [fields.unsettled & (fields.state == READ) for fields in unsettled]
    days_first = [rows & _is_day(fields.first) for rows, fields in zip(open_rows, unsettled, strict=True)]
    days_second = [rows & _is_day(fields.second) for rows, fields in zip(open_rows, unsettled, strict=True)]
    votes = any(rows.any() for rows in days_first), any(rows.any() for rows in days_second)
    if votes[0] != votes[1]:
        return votes[0]
    differ = [rows & (fields.first != fields.second) for rows, fields in zip(open_rows, unsettled, strict=True)]
    if not any(rows.any() for rows in differ):
        return True
    labelled = [table for table, item in zip(tables, read, strict=True) if isinstance(item, Fields)]
    if votes[0]:
        raise LogError(_both_orders(labelled, days_first, days_second))
    raise LogError(_no_order(labelled, differ))


def _is_day(number: npt.NDArray[np.int32]) -> BoolArray:
    return np.asarray((number > 12) & (number <= 31))


def _first_of(tables: Sequence[RawTable], rows: Sequence[BoolArray]) -> tuple[str, str]:
    """Return where the first marked stamp is, and the stamp."""
    table, marked = next((table, marked) for table, marked in zip(tables, rows, strict=True) if marked.any())
    row = int(np.argmax(marked))
    return f"{table.label}, {table.locate(row)}", stamp_text(table, row)


def stamp_text(table: RawTable, row: int) -> str:
    """Return a row's time stamp as it stands in the file, "" when the cell is empty."""
    cells = (_cell_text(column.slice(row, 1)) for column in table.times)
    return " ".join(cell for cell in cells if cell)


def _cell_text(cell: pa.ChunkedArray) -> str:
    try:
        return pc.cast(cell, pa.string())[0].as_py() or ""
    except pa.ArrowException:  # a time too far away to be written
        return str(cell[0].value)


def _no_order(tables: Sequence[RawTable], rows: Sequence[BoolArray]) -> Problem:
    where, stamp = _first_of(tables, rows)
    lines = [f'time_format = "{written}"' for written in formats_for(stamp)]
    return Problem(
        what="Nothing in the log tells whether the day or the month comes first.",
        where=where,
        found=f'"{stamp}", and no number above 12 in either place',
        expected="a date that can be read in one way only",
        do=f"add to [log] the line {' (day first) or '.join(lines)} (month first)",
    )


def _both_orders(tables: Sequence[RawTable], days: Sequence[BoolArray], months: Sequence[BoolArray]) -> Problem:
    (where, stamp), (other_where, other) = _first_of(tables, days), _first_of(tables, months)
    return Problem(
        what="Some dates can only be read day first, others only month first.",
        where=f"{where}; {other_where}",
        found=f'"{stamp}" and "{other}"',
        do=f'export the log in one way, or add to [log] the line time_format = "{formats_for(stamp)[0]}"',
    )


def _assemble(fields: Fields, day_first: bool) -> Stamps:
    n = len(fields.state)
    whole, state = np.empty(n, dtype=np.int64), np.empty(n, dtype=np.uint8)
    for start in range(0, n, _BLOCK):
        block = slice(start, start + _BLOCK)
        whole[block], state[block] = _instants(fields, block, day_first)
    return Stamps(nanoseconds=whole, local=fields.offset == NO_OFFSET, state=state, leap=fields.leap)


def _instants(fields: Fields, block: slice, day_first: bool) -> tuple[IntArray, npt.NDArray[np.uint8]]:
    first, second, offset = fields.first[block], fields.second[block], fields.offset[block]
    swap = fields.unsettled[block] & day_first
    days, exists = _days_since_1970(fields.year[block], np.where(swap, second, first), np.where(swap, first, second))
    state = np.where((fields.state[block] == READ) & ~exists, IMPOSSIBLE, fields.state[block]).astype(np.uint8)
    whole = days * DAY + fields.clock[block] - np.where(offset == NO_OFFSET, 0, offset)
    return np.where(state == READ, whole, 0), state


def _days_since_1970(
    year: npt.NDArray[np.int32], month: npt.NDArray[np.int32], day: npt.NDArray[np.int32]
) -> tuple[IntArray, BoolArray]:
    exists = (month >= 1) & (month <= 12) & (day >= 1) & (year >= _FIRST_YEAR) & (year <= _LAST_YEAR)
    place = np.where(exists, (year - _FIRST_YEAR) * 12 + month - 1, 0)
    first = _MONTH_STARTS[place]
    exists &= day <= _MONTH_STARTS[place + 1] - first
    return first + np.where(exists, day - 1, 0), exists


def ends_a_month(nanoseconds: IntArray) -> BoolArray:
    """Tell whether instants lie in the last second of a month UTC, the only place where a leap second can be."""
    after = nanoseconds // SECOND + 1
    days = after // 86400
    first = days.astype("datetime64[D]").astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    return np.asarray((after % 86400 == 0) & (first == days))
