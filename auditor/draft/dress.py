"""How a text log is dressed: encoding, delimiter, decimal sign, lines before the header, header and units line."""

from __future__ import annotations

import csv
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from auditor.draft.words import is_unit

DELIMITERS = (",", ";", "\t", "|")
LINES_LOOKED_AT = 200

_NUMBER = re.compile(r"[-+]?(?:\d+(?:[.,]\d*)?|[.,]\d+)(?:[eE][-+]?\d+)?")
_WITH_COMMA = re.compile(r"[-+]?\d*,\d+(?:[eE][-+]?\d+)?")
_WITH_POINT = re.compile(r"[-+]?\d*\.\d+(?:[eE][-+]?\d+)?")
_TIME = re.compile(r"\d{1,4}[-./ ](?:\d{1,2}|[A-Za-z]{3})[-./ ]\d{1,4}(?:[T, ].*)?|\d{1,2}:\d{2}.*|\d{8}T\d{4,6}.*")


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Dress:
    """What was found by looking at the head of a text log.

    Attributes
    ----------
    encoding, delimiter, decimal : str
    skip_rows : int
        Lines before the header.
    names : tuple of str
        The header; empty when there is none.
    units : tuple of str
        The units line, one per name; empty when there is none.
    body : int
        Line (from 0) of the first row of numbers.
    before : str
        The text before the header.
    """

    encoding: str
    delimiter: str
    decimal: str
    skip_rows: int
    names: tuple[str, ...]
    units: tuple[str, ...]
    body: int
    before: str


def encoding_of(head: bytes) -> str:
    """Return the encoding of text by its first bytes: a mark, NUL bytes, valid UTF-8, else cp1252."""
    if head.startswith((b"\xff\xfe", b"\xfe\xff")):
        return "utf-16"
    if len(head) > 3 and head[1::2].count(0) > len(head) // 4:
        return "utf-16-le"
    try:
        # The head may end within a character: everything up to its last line end is whole.
        head[: head.rfind(b"\n") + 1 or None].decode("utf-8")
    except UnicodeDecodeError:
        return "cp1252"
    return "utf-8"


def look_at(text: str, encoding: str) -> Dress | None:
    """Find out how `text` is dressed.

    Parameters
    ----------
    text : str
        The decoded head of the log, lines ending in a line feed.
    encoding : str
        The encoding it was decoded with.

    Returns
    -------
    Dress or None
        None when no delimiter gives a table.
    """
    lines = text.split("\n")[:LINES_LOOKED_AT]
    best = max(DELIMITERS, key=lambda delimiter: _fit(lines, delimiter))
    if _fit(lines, best) <= 0:
        return None
    rows = _split(lines, best)
    width = _width(rows)
    body = _first_body(rows, width)
    header, units = _header(rows, width, body)
    return Dress(
        encoding=encoding,
        delimiter=best,
        decimal=_decimal(rows[body:]),
        skip_rows=header or 0,
        names=_padded(rows[header], width) if header is not None else (),
        units=_padded(rows[units], width) if units is not None else (),
        body=body,
        before="\n".join(lines[:body]),
    )


def _split(lines: Sequence[str], delimiter: str) -> list[list[str]]:
    return [[cell.strip() for cell in row] for line in lines for row in csv.reader([line], delimiter=delimiter)]


def _width(rows: Sequence[Sequence[str]]) -> int:
    widths = Counter(len(row) for row in rows[len(rows) // 3 :] if row)
    return widths.most_common(1)[0][0] if widths else 0


def _fit(lines: Sequence[str], delimiter: str) -> float:
    """Share of cells that are numbers, times or empty when split this way; a hair more for more columns."""
    rows = _split(lines, delimiter)
    width = _width(rows)
    if width < 2:
        return 0.0
    tail = rows[len(rows) // 3 :]
    cells = [cell for row in tail if len(row) == width for cell in row]
    plain = sum(_is_value(cell) or not cell for cell in cells) + 0.3 * sum(cell.isalpha() for cell in cells)
    whole = sum(len(row) == width for row in tail) / len(tail)
    return plain / len(cells) * whole + 1e-3 * min(width, 50)


def _is_value(cell: str) -> bool:
    return _NUMBER.fullmatch(cell) is not None or _TIME.fullmatch(cell) is not None


def _is_body(row: Sequence[str], width: int) -> bool:
    filled = [cell for cell in row if cell]
    return len(row) == width and bool(filled) and 2 * sum(map(_is_value, filled)) >= len(filled)


def _first_body(rows: Sequence[Sequence[str]], width: int) -> int:
    for n in range(len(rows) - 1):
        if _is_body(rows[n], width) and _is_body(rows[n + 1], width):
            return n
    return next((n for n, row in enumerate(rows) if _is_body(row, width)), len(rows))


def _header(rows: Sequence[Sequence[str]], width: int, body: int) -> tuple[int | None, int | None]:
    """Return the lines of header and units line; a trailing delimiter may make the header one cell short."""
    wide = [n for n in range(body) if len(rows[n]) in (width, width - 1) and sum(map(bool, rows[n])) >= 1]
    if not wide:
        return None, None
    if len(wide) > 1 and _looks_like_units(rows[wide[-1]]):
        return wide[-2], wide[-1]
    return wide[-1], None


def _looks_like_units(row: Sequence[str]) -> bool:
    filled = [cell for cell in row if cell]
    return 2 * sum(map(is_unit, filled)) >= len(filled)


def _padded(row: Sequence[str], width: int) -> tuple[str, ...]:
    return tuple(row) + ("",) * (width - len(row))


def _decimal(rows: Sequence[Sequence[str]]) -> str:
    cells = [cell for row in rows for cell in row]
    commas = sum(_WITH_COMMA.fullmatch(cell) is not None for cell in cells)
    points = sum(_WITH_POINT.fullmatch(cell) is not None for cell in cells)
    return "," if commas > points else "."
