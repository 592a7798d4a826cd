"""Rows that are no rows: footers, blank rows and repeated headers leave, with a finding; the rest must have a time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, IntArray
from auditor.errors import LogError, Problem
from auditor.logs.findings.base import Finding
from auditor.logs.raw_table import RawTable
from auditor.logs.stamp_layouts import IMPOSSIBLE, READ, UNREADABLE
from auditor.logs.stamp_patterns import formats_for
from auditor.logs.timestamps import Stamps, stamp_text
from auditor.loop import LogSource

_LONGEST_FOOTER = 10


def tidy(table: RawTable, stamps: Stamps, source: LogSource) -> tuple[RawTable, Stamps]:
    """Drop what is no row, and return the rest with a finding for everything dropped.

    Raises
    ------
    LogError
        When a row that is none of these has no readable time stamp, naming the first one and their number.
    """
    bad = np.flatnonzero(stamps.state != READ)
    if not len(bad):
        return table, stamps
    blank = _blank(table, bad)
    texts = [stamp_text(table, int(row)) for row in bad] if len(bad) < len(table) else []
    header = np.array([table.header != "" and text == table.header for text in texts] or np.zeros(len(bad), bool))
    footer = _footer(bad, blank | header, stamps, len(table)) if table.header else np.zeros(len(bad), dtype=np.bool_)
    left = bad[~(blank | header | footer)]
    if len(left):
        raise LogError(_no_time(table, left, stamps, source))
    findings = [
        _dropped("blank-row", bad[blank], table, "rows without any value"),
        _dropped("repeated-header", bad[header & ~blank], table, "rows that repeat the header"),
        _dropped("footer", bad[footer], table, "rows after the last time stamp"),
    ]
    return _without(table, stamps, bad, [finding for finding in findings if finding is not None])


def _blank(table: RawTable, rows: IntArray) -> BoolArray:
    """Tell which of `rows` hold nothing in any of the needed columns."""
    blank = np.ones(len(rows), dtype=np.bool_)
    for column in [*table.times, *table.numbers.values()]:
        cells = column.take(pa.array(rows))
        empty = pc.is_null(cells, nan_is_null=True)
        if pa.types.is_string(cells.type):
            empty = pc.or_(empty, pc.fill_null(pc.equal(pc.utf8_trim_whitespace(cells), ""), True))
        blank &= np.asarray(empty.to_numpy(), dtype=np.bool_)
    return blank


def _footer(bad: IntArray, known: BoolArray, stamps: Stamps, n: int) -> BoolArray:
    """Mark unread rows that end the file, if they are few; `known` rows may stand among them."""
    footer = np.zeros(len(bad), dtype=np.bool_)
    for k in range(len(bad) - 1, -1, -1):
        if bad[k] != n - (len(bad) - k) or not (known[k] or stamps.state[bad[k]] == UNREADABLE):
            break
        footer[k] = not known[k]
    return footer if footer.sum() <= min(_LONGEST_FOOTER, n - len(bad)) else np.zeros_like(footer)


def _dropped(kind: str, rows: IntArray, table: RawTable, what: str) -> Finding | None:
    if not len(rows):
        return None
    first = int(rows[0])
    text = stamp_text(table, first)
    detail = f"{table.label}: {len(rows)} {what}, first at {table.locate(first)}" + (f': "{text[:60]}"' if text else "")
    return Finding(kind=kind, start=None, end=None, count=len(rows), detail=detail, effect="skipped")


def _without(table: RawTable, stamps: Stamps, rows: IntArray, findings: Sequence[Finding]) -> tuple[RawTable, Stamps]:
    keep = np.ones(len(table), dtype=np.bool_)
    keep[rows] = False
    short = replace(table.keep(keep), findings=(*table.findings, *findings))
    return short, stamps.keep(keep)


def _no_time(table: RawTable, rows: IntArray, stamps: Stamps, source: LogSource) -> Problem:
    first = int(rows[0])
    text = stamp_text(table, first)
    more = f" and {len(rows) - 1} more" if len(rows) > 1 else ""
    where = f"{table.label}, {table.locate(first)}, time column"
    found = (f'"{text}"' if text else "an empty cell") + more
    if stamps.state[first] == IMPOSSIBLE:
        what, expected = "A time stamp names a time that does not exist or is out of reach.", "a time in 1678…2261"
        do = (
            _other_unit(source)
            or "correct the row, or take it out; if the format was misread, state time_format in [log]"
        )
    else:
        what, expected, do = "A time stamp cannot be read.", _expected(source), _advice(text, source)
    return Problem(what=what, where=where, found=found, expected=expected, do=do)


def _other_unit(source: LogSource) -> str:
    if source.time_unit is None or source.time_format is not None:
        return ""
    return f'look whether time_unit = "{source.time_unit}" is right: the numbers are too large for it'


def _expected(source: LogSource) -> str:
    if source.time_format is not None:
        return f'a stamp like time_format = "{source.time_format}"'
    if source.time_unit is not None:
        return f'a number, because time_unit = "{source.time_unit}" is stated'
    return "a stamp like 2025-03-01T12:00:00Z or 2025-03-01 12:00:00"


def _advice(text: str, source: LogSource) -> str:
    if not text:
        return "fill in the time, or take the row out"
    formats = formats_for(text) if source.time_format is None else ()
    if formats:
        return "add to [log] the line that is meant: " + " or ".join(f'time_format = "{line}"' for line in formats)
    if source.time_unit is not None:
        return "take time_unit out of [log] if the stamps are dates; otherwise correct the row"
    return 'state time_format in [log], like "%d.%m.%Y %H:%M:%S", or correct the row'
