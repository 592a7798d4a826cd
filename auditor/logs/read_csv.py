"""One text log (CSV and its relatives) as a `RawTable`: cells stay text, only the needed columns are built."""

from __future__ import annotations

import csv
import itertools
from dataclasses import replace

import pyarrow as pa
import pyarrow.csv

from auditor.errors import LogError, Problem, raise_all
from auditor.logs.dress import Dress, look
from auditor.logs.findings.base import Finding
from auditor.logs.packed import UNREADABLE, Place, open_text, stream
from auditor.logs.raw_table import RawTable, Wanted, column_problems, time_columns
from auditor.logs.stated import stated_amiss
from auditor.loop import LogSource

_BLOCK = 4 * 1024 * 1024
_FEW_ROWS = 10
_FEW_SHARE = 0.01
_MOST_ROWS = 10_000
_AGAIN = "state [log] delimiter, encoding and skip_rows, or export the log again"


class _OddRows:
    """Collects the lines that have not as many cells as a row has, and gives up when there are very many."""

    def __init__(self) -> None:
        self.texts: list[str] = []
        self.example = ""

    def __call__(self, row: pa.csv.InvalidRow) -> str:
        self.texts.append(row.text)
        self.example = self.example or f"{row.actual_columns} cells: {_short(row.text)}"
        return "skip" if len(self.texts) <= _MOST_ROWS else "error"


def read_csv(path: Place, label: str, source: LogSource, wanted: Wanted) -> RawTable:
    """Read the wanted columns of a text log, packed or not.

    Parameters
    ----------
    path : Path or Member
    label : str
        What the file is called in errors.
    source : LogSource
        What the loop file states about the log's dress; the rest is found by looking.
    wanted : Wanted
        The columns to read; no other is built.

    Raises
    ------
    LogError
        When the file cannot be opened or decoded, lacks a wanted column, holds a header only, or when more than
        10 rows and 1 % of the rows have not the usual number of cells.
    """
    dress = look(path, label, source, wanted)
    missing = column_problems(wanted, dress.names, label)
    if len(missing) == len(wanted.names()):
        missing = stated_amiss(path, label, source, wanted, dress) or missing
    raise_all(LogError, missing or _shape_problems(dress, wanted, label))
    odd = _OddRows()
    try:
        table, dress = _parse(path, dress, wanted, odd, stated=source.encoding is not None)
    except (pa.ArrowInvalid, UnicodeError, *UNREADABLE) as error:
        raise LogError(_unreadable(error, dress, odd, label)) from None
    _check_rows(table.num_rows, dress, odd, label)
    return _raw_table(table, path, dress, wanted, label, _findings(path, dress, odd, label))


def _shape_problems(dress: Dress, wanted: Wanted, label: str) -> list[Problem]:
    if dress.empty:
        return [_no_rows(dress, label)]
    if dress.spare_cell:
        what = f"The rows have {dress.cells} cells, the header has {len(dress.names)} names."
        do = "put decimal commas in quotes or use another delimiter, or name the last column"
        return [Problem(what=what, where=label, found=f'"{dress.spare_cell}" beyond the last name', do=do)]
    last = max(_places(dress, wanted))
    if last >= dress.cells:
        what = f'The rows have {dress.cells} cells, column "{dress.names[last]}" would be number {last + 1}.'
        return [Problem(what=what, where=label, do="check the header line; " + _AGAIN)]
    return []


def _places(dress: Dress, wanted: Wanted) -> list[int]:
    return [dress.names.index(name) for name in wanted.columns(dress.names)]


def _parse(path: Place, dress: Dress, wanted: Wanted, odd: _OddRows, stated: bool) -> tuple[pa.Table, Dress]:
    try:
        return _parse_as(path, dress, wanted, odd), dress
    except pa.ArrowInvalid as error:
        # The sample was plain ASCII and a letter further down is not UTF-8: the other common encoding is meant.
        if stated or "invalid UTF8" not in str(error):
            raise
        odd.texts.clear()
        dress = replace(dress, encoding="cp1252")
        return _parse_as(path, dress, wanted, odd), dress


def _parse_as(path: Place, dress: Dress, wanted: Wanted, odd: _OddRows) -> pa.Table:
    columns = [str(place) for place in _places(dress, wanted)]
    coded = {str(dress.names.index(name)): pa.dictionary(pa.int32(), pa.string()) for name in wanted.coded()}
    read = pa.csv.ReadOptions(
        skip_rows=dress.lines_before,
        column_names=[str(place) for place in range(dress.cells)],
        encoding="utf-8" if dress.encoding == "utf-8-sig" else dress.encoding,
        block_size=_BLOCK,
    )
    cut = pa.csv.ParseOptions(delimiter=dress.delimiter, newlines_in_values=dress.multiline, invalid_row_handler=odd)
    convert = pa.csv.ConvertOptions(
        include_columns=columns,
        column_types={name: pa.string() for name in columns} | coded,
        null_values=[""],
        strings_can_be_null=True,
    )
    with stream(path) as file:
        return pa.csv.read_csv(file, read_options=read, parse_options=cut, convert_options=convert)


def _unreadable(error: Exception, dress: Dress, odd: _OddRows, label: str) -> Problem:
    if odd.texts and "Expected" in str(error):
        return _too_odd(f"more than {_MOST_ROWS}", dress, odd, label)
    if isinstance(error, UnicodeError) or "UTF8" in str(error):
        return _wrong_letters(error, dress, label)
    return Problem(what="The log cannot be read as a table.", where=label, found=_short(str(error)), do=_AGAIN)


def _wrong_letters(error: Exception, dress: Dress, label: str) -> Problem:
    found = "letters beyond the beginning of the file that are written in another way"
    if isinstance(error, UnicodeDecodeError):
        found = f"byte 0x{error.object[error.start]:02x} beyond the beginning of the file"
    return Problem(
        what=f"The log has letters that are not {dress.encoding}.",
        where=label,
        found=found,
        expected=f"text in {dress.encoding} throughout",
        do='state the encoding the log was exported with in [log], such as encoding = "cp1252"',
    )


def _too_odd(count: str, dress: Dress, odd: _OddRows, label: str) -> Problem:
    what = f"The lines do not have equally many cells: {count} differ."
    return Problem(what=what, where=label, found=odd.example, expected=f"{dress.cells} cells in every line", do=_AGAIN)


def _check_rows(rows: int, dress: Dress, odd: _OddRows, label: str) -> None:
    if len(odd.texts) > max(_FEW_ROWS, _FEW_SHARE * rows):
        raise LogError(_too_odd(f"{len(odd.texts)} of {rows + len(odd.texts)}", dress, odd, label))
    if rows == 0:
        raise LogError(_no_rows(dress, label))


def _no_rows(dress: Dress, label: str) -> Problem:
    found = f"a header with {len(dress.names)} columns and no row below it"
    return Problem(what="The log holds no rows.", where=label, found=found, do="export it again, or leave it out")


def _findings(path: Place, dress: Dress, odd: _OddRows, label: str) -> tuple[Finding, ...]:
    findings = []
    if dress.below_header:
        shown = " / ".join(_short(line) for line in dress.below_header)
        count = len(dress.below_header)
        findings.append(_note("lines-below-header", count, f"{label}, below the header: {shown}", "skipped"))
    if odd.texts:
        findings += _odd_findings(path, dress, odd, label)
    return tuple(findings)


def _odd_findings(path: Place, dress: Dress, odd: _OddRows, label: str) -> list[Finding]:
    """Tell lines after the last row (a footer) from broken lines among the rows."""
    lines, last_row = _find(path, dress, set(odd.texts))
    below = [text for number, text in lines if number > last_row]
    among = [f"line {number}: {_short(text)}" for number, text in lines if number <= last_row]
    findings = []
    if below:
        shown = " / ".join(_short(text) for text in below[:3])
        findings.append(_note("footer", len(below), f"{label}, below the last complete row: {shown}", "skipped"))
    broken = len(odd.texts) - len(below)
    if broken:
        detail = (
            f"{label}: {broken} lines have not {dress.cells} cells, the first at {among[0] if among else odd.example}"
        )
        findings.append(_note("broken-row", broken, detail, "skipped"))
    return findings


def _find(path: Place, dress: Dress, texts: set[str]) -> tuple[list[tuple[int, str]], int]:
    """Find lines by their text; also return the number of the last line that is a row."""
    found, last_row = [], dress.lines_before
    with open_text(path, dress.encoding) as file:
        for number, line in enumerate(file, start=1):
            text = line.rstrip("\n")
            if number > dress.lines_before and text in texts:
                found.append((number, text))
            elif text:
                last_row = number
    return found, last_row


def _raw_table(
    table: pa.Table, path: Place, dress: Dress, wanted: Wanted, label: str, findings: tuple[Finding, ...]
) -> RawTable:
    def column(name: str) -> pa.ChunkedArray:
        return table.column(str(dress.names.index(name)))

    def maybe(name: str | None) -> pa.ChunkedArray | None:
        return None if name is None else column(name)

    times = time_columns(wanted.time, dress.names)
    return RawTable(
        label=label,
        times=tuple(column(name) for name in times),
        numbers={name: column(name) for name in wanted.numbers},
        mode=maybe(wanted.mode),
        tag=maybe(wanted.tag),
        quality=maybe(wanted.quality),
        locate=lambda row: f"line {_line_of_row(path, dress, row)}",
        decimal=dress.decimal,
        header=" ".join(times),
        findings=findings,
    )


def _line_of_row(path: Place, dress: Dress, row: int) -> int:
    """Count lines up to a row; slow, but asked for only when something is wrong there."""
    with open_text(path, dress.encoding) as file:
        rows = csv.reader(itertools.islice(file, dress.lines_before, None), delimiter=dress.delimiter)
        seen = -1
        for cells in rows:
            seen += len(cells) == dress.cells
            if seen == row:
                return dress.lines_before + rows.line_num
    return dress.lines_before + row + 1


def _note(kind: str, count: int, detail: str, effect: str) -> Finding:
    return Finding(kind=kind, start=None, end=None, count=count, detail=detail, effect=effect)


def _short(text: str) -> str:
    return text if len(text) <= 80 else text[:79] + "…"
