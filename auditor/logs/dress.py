"""How a text log is dressed (encoding, delimiter, decimal sign, header), found by looking at its beginning.

Whatever the loop file states is taken as stated; only the rest is looked for.
"""

from __future__ import annotations

import codecs
import contextlib
import csv
import io
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from auditor.errors import LogError, Problem
from auditor.logs.files import wide_encoding
from auditor.logs.packed import UNREADABLE, Place, head
from auditor.logs.raw_table import Wanted, time_columns
from auditor.loop import LogSource

DELIMITERS = (";", "\t", "|", ",")
_SAMPLE = 64 * 1024
_LARGE_SAMPLE = 4 * 1024 * 1024
_MOST_LINES_BELOW_HEADER = 3
_NUMBER = re.compile(r"[+-]?(\d+([.,]\d*)?|[.,]\d+)([eE][+-]?\d+)?")
_COMMA_NUMBER = re.compile(r"[+-]?\d*,\d+([eE][+-]?\d+)?")
_POINT_NUMBER = re.compile(r"[+-]?\d*\.\d+([eE][+-]?\d+)?")


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Dress:
    """How one text log is written.

    Attributes
    ----------
    encoding, delimiter, decimal : str
    names : tuple of str
        Column names as in the header, outer blanks removed.
    below_header : tuple of str
        Lines between the header and the first row (units, descriptions).
    lines_before : int
        Lines before the first row.
    cells : int
        Cells per row.
    multiline : bool
        Whether a quoted cell runs over several lines.
    empty : bool
        Whether nothing stands below the header.
    spare_cell : str
        A filled cell beyond the last name; "" when there is none, as there should be.
    """

    encoding: str
    delimiter: str
    decimal: str
    names: tuple[str, ...]
    below_header: tuple[str, ...]
    lines_before: int
    cells: int
    multiline: bool
    empty: bool
    spare_cell: str = ""


@dataclass(frozen=True, eq=False, slots=True)
class _Sheet:
    """The sample cut into cells with one delimiter; `ends[i]` is the last line of row i, counted from 1."""

    delimiter: str
    rows: list[list[str]]
    ends: list[int]
    header: int


def look(path: Place, label: str, source: LogSource, wanted: Wanted) -> Dress:
    """Find out how the text log at `path` is dressed.

    Raises
    ------
    LogError
        When the file cannot be opened or decoded, or when a stated delimiter, decimal sign or encoding is none.
    """
    raw, complete = _sample(path, label)
    encoding = _encoding(raw, complete, label, source.encoding)
    text = codecs.getincrementaldecoder(encoding)(errors="replace").decode(raw, complete)
    text = text.removeprefix("\ufeff")
    if not complete:
        text = text[: max(text.rfind("\n"), text.rfind("\r")) + 1] or text
    _check_stated(source, label)
    candidates = (source.delimiter,) if source.delimiter is not None else DELIMITERS
    sheets = [_sheet(text, delimiter, source.skip_rows, wanted) for delimiter in candidates]
    return _dress(max(sheets, key=lambda sheet: _score(sheet, wanted)), encoding, source.decimal, wanted)


def _sample(path: Place, label: str) -> tuple[bytes, bool]:
    """Return the beginning of the file, and whether it is the whole."""
    try:
        raw, size = head(path, _SAMPLE), _SAMPLE
        if len(raw) == _SAMPLE and raw.count(b"\n") + raw.count(b"\r") < 20:
            raw, size = head(path, _LARGE_SAMPLE), _LARGE_SAMPLE
    except UNREADABLE as error:
        what = "The log cannot be unpacked or read."
        raise LogError(Problem(what=what, where=label, found=str(error), do="copy or export it again")) from None
    return raw, len(raw) < size


def _encoding(raw: bytes, complete: bool, label: str, stated: str | None) -> str:
    if stated is not None:
        return _stated_encoding(raw, complete, label, stated)
    wide = wide_encoding(raw)
    if wide is not None:
        return wide
    try:
        codecs.getincrementaldecoder("utf-8")().decode(raw, complete)
    except UnicodeDecodeError:
        return "cp1252"
    return "utf-8-sig" if raw.startswith(codecs.BOM_UTF8) else "utf-8"


def _stated_encoding(raw: bytes, complete: bool, label: str, stated: str) -> str:
    try:
        with contextlib.suppress(UnicodeError):  # one byte is too few for some encodings
            b" ".decode(stated)
    except LookupError:
        what, expected = f'No encoding is called "{stated}".', "utf-8, utf-16, cp1252, latin-1, …"
        do = f"correct it, or leave it out and {label} is looked at"
        raise LogError(Problem(what=what, where="[log] encoding", expected=expected, do=do)) from None
    try:
        codecs.getincrementaldecoder(stated)().decode(raw, complete)
    except UnicodeError as error:
        raise LogError(_does_not_fit(error, raw, complete, label, stated)) from None
    return codecs.lookup(stated).name


def _does_not_fit(error: UnicodeError, raw: bytes, complete: bool, label: str, stated: str) -> Problem:
    """Say where the first letter is that the stated encoding does not have, and which encoding would do."""
    found, where = "no text in that encoding", label
    if isinstance(error, UnicodeDecodeError):
        line = raw[: error.start].count(b"\n")
        start, end = raw.rfind(b"\n", 0, error.start) + 1, raw.find(b"\n", error.start)
        around = raw[start : end if end > 0 else None].decode("cp1252", "replace").strip()
        found, where = f"byte 0x{raw[error.start]:02x} in: {around[:60]}", f"{label}, line {line + 1}"
    fits = _encoding(raw, complete, label, None)
    do = "leave out [log] encoding, so that the log is looked at"
    if codecs.lookup(fits).name != codecs.lookup(stated).name:
        do = f'state encoding = "{fits}" in [log], or leave it out'
    return Problem(
        what=f"The log is not written in the stated encoding {stated}.",
        where=where,
        found=found,
        expected=f'text in {stated}, as [log] encoding = "{stated}" says',
        do=do,
    )


def _check_stated(source: LogSource, label: str) -> None:
    problems = []
    if source.delimiter is not None and (len(source.delimiter) != 1 or source.delimiter in '\r\n"'):
        found = repr(source.delimiter)
        what = "The delimiter must be one character."
        problems.append(
            Problem(what=what, where="[log] delimiter", found=found, do=f"leave it out to have {label} looked at")
        )
    if source.decimal not in (None, ".", ","):
        what = "The decimal sign must be a point or a comma."
        problems.append(
            Problem(what=what, where="[log] decimal", found=repr(source.decimal), do="correct or leave out")
        )
    if problems:
        raise LogError(*problems)


def _sheet(text: str, delimiter: str, skip: int | None, wanted: Wanted) -> _Sheet:
    lines = io.StringIO(text, newline="")
    for _ in range(skip or 0):
        next(lines, None)
    reader = csv.reader(lines, delimiter=delimiter)
    rows, ends = [], []
    try:
        for row in reader:
            if any(cell.strip() for cell in row):
                rows.append([cell.strip() for cell in row])
                ends.append((skip or 0) + reader.line_num)
    except csv.Error:
        pass  # a cell beyond the size limit: the rows so far are enough to judge by
    return _Sheet(delimiter, rows, ends, 0 if skip is not None else _header(rows, wanted))


def _header(rows: list[list[str]], wanted: Wanted) -> int:
    """Find the row with most of the wanted names; without any, the first row as long as most rows are."""
    found = [_names_found(row, wanted) for row in rows]
    if any(found):
        return found.index(max(found))
    usual = _usual_length(rows)
    return next((k for k, row in enumerate(rows) if len(row) == usual), 0)


def _names_found(row: Sequence[str], wanted: Wanted) -> int:
    # A column without a name is wanted now and then, but an empty cell tells nothing about a row.
    named = sum(name != "" and name in row for name in wanted.names())
    return named + bool(wanted.time not in row and time_columns(wanted.time, row))


def _usual_length(rows: Sequence[Sequence[str]]) -> int:
    lengths = Counter(len(row) for row in rows if len(row) > 1) or Counter(len(row) for row in rows)
    return lengths.most_common(1)[0][0] if lengths else 0


def _score(sheet: _Sheet, wanted: Wanted) -> tuple[int, float, int]:
    if not sheet.rows:
        return 0, 0.0, 0
    body = sheet.rows[sheet.header :]
    usual = _usual_length(body)
    alike = sum(len(row) == usual for row in body) / len(body)
    return _names_found(sheet.rows[sheet.header], wanted), alike if usual > 1 else 0.0, usual


def _dress(sheet: _Sheet, encoding: str, decimal: str | None, wanted: Wanted) -> Dress:
    names = tuple(sheet.rows[sheet.header]) if sheet.rows else ()
    first = _first_row(sheet, names, wanted)
    body = sheet.rows[first:]
    cells = _usual_length(body) or len(names)
    starts = [0, *sheet.ends]
    return Dress(
        encoding=encoding,
        delimiter=sheet.delimiter,
        decimal=decimal or _decimal(body, _positions(names, wanted)),
        names=names,
        below_header=tuple(sheet.delimiter.join(row) for row in sheet.rows[sheet.header + 1 : first]),
        lines_before=starts[first] if sheet.rows else 0,
        cells=cells,
        multiline=any("\n" in cell or "\r" in cell for row in body for cell in row),
        empty=not body,
        spare_cell=next((cell for row in body if len(row) == cells for cell in row[len(names) :] if cell), ""),
    )


def _positions(names: Sequence[str], wanted: Wanted) -> list[int]:
    return [names.index(name) for name in wanted.numbers if name in names]


def _first_row(sheet: _Sheet, names: Sequence[str], wanted: Wanted) -> int:
    """Index of the first row of data: lines with units or descriptions may stand below the header."""
    start = sheet.header + 1
    times = [names.index(name) for name in time_columns(wanted.time, names)]
    numbers = _positions(names, wanted)
    for row in range(start, min(start + _MOST_LINES_BELOW_HEADER, len(sheet.rows))):
        if not times or _is_data(sheet.rows[row], times, numbers):
            return row
        start = row + 1
    return start


def _is_data(row: Sequence[str], times: Sequence[int], numbers: Sequence[int]) -> bool:
    stamp = " ".join(row[k] for k in times if k < len(row))
    looks_like_time = _NUMBER.fullmatch(stamp) is not None or len(re.findall(r"\d+", stamp)) > 1
    return looks_like_time or any(k < len(row) and _NUMBER.fullmatch(row[k]) for k in numbers)


def _decimal(rows: Sequence[Sequence[str]], numbers: Sequence[int]) -> str:
    cells = [row[k] for row in rows for k in numbers if k < len(row)]
    commas = sum(_COMMA_NUMBER.fullmatch(cell) is not None for cell in cells)
    points = sum(_POINT_NUMBER.fullmatch(cell) is not None for cell in cells)
    return "," if commas > points else "."
