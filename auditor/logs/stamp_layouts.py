"""Time stamps as text, read many at a time.

A log writes its stamps in very few *layouts*: equally long texts with digits at the same places and the same signs
between them. One stamp of each layout is read by a pattern; that tells where its fields are, and all stamps of the
same layout are then cut into fields together. What follows no pattern stays unread.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, IntArray
from auditor.logs.stamp_patterns import MONTHS

READ, UNREADABLE, IMPOSSIBLE = 0, 1, 2
NO_OFFSET = np.iinfo(np.int64).min
SECOND = 1_000_000_000
_MOST_SHAPES = 500
_BLOCK = 16_384  # rows at a time: their bytes stay in the processor's cache
_Bytes: TypeAlias = npt.NDArray[np.uint8]
_SmallInts: TypeAlias = npt.NDArray[np.int32]
_Value: TypeAlias = Callable[[str], _SmallInts]


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Fields:
    """Stamps cut into fields, each array of shape (n,); written once, by `read_fields`.

    Attributes
    ----------
    year, first, second : ndarray of int32
        Month and day; where `unsettled`, two numbers of which either may be the day.
    clock : ndarray of int64
        Time of day [ns]; second 60 is the last nanosecond of its minute.
    offset : ndarray of int64
        Offset from UTC [ns], `NO_OFFSET` where none is written.
    state : ndarray of uint8
        READ, UNREADABLE (no known way of writing) or IMPOSSIBLE (a field out of its range).
    unsettled, leap : ndarray of bool
        Whether day and month may be swapped; whether the second is 60.
    """

    year: npt.NDArray[np.int32]
    first: npt.NDArray[np.int32]
    second: npt.NDArray[np.int32]
    clock: IntArray
    offset: IntArray
    state: npt.NDArray[np.uint8]
    unsettled: BoolArray
    leap: BoolArray


def read_fields(column: pa.ChunkedArray, patterns: Sequence[re.Pattern[bytes]]) -> Fields:
    """Cut a column of stamps into fields; the first pattern that fits a layout is taken.

    Parameters
    ----------
    column : pyarrow.ChunkedArray of string
    patterns : sequence of compiled patterns over bytes
        With the named groups of `stamp_patterns`.
    """
    n = len(column)
    fields = Fields(
        year=np.full(n, 1970, dtype=np.int32),
        first=np.ones(n, dtype=np.int32),
        second=np.ones(n, dtype=np.int32),
        clock=np.zeros(n, dtype=np.int64),
        offset=np.full(n, NO_OFFSET, dtype=np.int64),
        state=np.full(n, UNREADABLE, dtype=np.uint8),
        unsettled=np.zeros(n, dtype=np.bool_),
        leap=np.zeros(n, dtype=np.bool_),
    )
    book = _Book(patterns)
    start = 0
    for chunk in pc.fill_null(column, "").chunks:
        for piece in range(0, len(chunk), _BLOCK):
            block = chunk.slice(piece, _BLOCK)
            for rows, texts in _by_length(block):
                book.read(texts, rows + start, fields)
            start += len(block)
    return fields


def _by_length(chunk: pa.Array) -> Iterator[tuple[IntArray, _Bytes]]:
    """Split a chunk into equally long texts: their rows, and their bytes as a matrix."""
    if len(chunk) == 0:
        return
    wide = pa.types.is_large_string(chunk.type)
    _, offset_buffer, data_buffer = chunk.buffers()
    bounds = np.frombuffer(offset_buffer, dtype=np.int64 if wide else np.int32)
    bounds = bounds[chunk.offset : chunk.offset + len(chunk) + 1].astype(np.int64)
    data = np.frombuffer(data_buffer if data_buffer is not None else b"", dtype=np.uint8)
    lengths = np.diff(bounds)
    alike = lengths.min() == lengths.max()
    for length in lengths[:1] if alike else np.unique(lengths):
        rows = np.arange(len(chunk)) if alike else np.flatnonzero(lengths == length)
        if length == 0:
            continue
        if alike:
            yield rows, data[bounds[0] : bounds[-1]].reshape(len(rows), length)
        else:
            yield rows, data[bounds[rows][:, None] + np.arange(length)]


@dataclass(frozen=True, eq=False, slots=True)
class _Layout:
    """Where the fields are in one layout: `base` is the text with zeros for digits, `spread` 9 at digits, 0 elsewhere.

    `spans` is None for a layout that no pattern reads.
    """

    base: _Bytes
    spread: _Bytes
    spans: dict[str, tuple[int, int]] | None
    words: dict[str, bytes]

    def fits(self, texts: _Bytes) -> tuple[BoolArray, _Bytes]:
        digits = texts - self.base  # wraps around below zero, which is then above `spread` as well
        return np.asarray((digits <= self.spread).all(axis=1)), digits


class _Book:
    """The layouts met so far, by length."""

    def __init__(self, patterns: Sequence[re.Pattern[bytes]]) -> None:
        self._patterns = patterns
        self._layouts: dict[int, list[_Layout]] = {}
        self._shapes = 0

    def read(self, texts: _Bytes, rows: IntArray, fields: Fields) -> None:
        known = self._layouts.setdefault(texts.shape[1], [])
        tried = 0
        while len(rows):
            if tried == len(known):
                if self._shapes >= _MOST_SHAPES:
                    return
                self._shapes += 1
                known.append(_layout(texts[0].tobytes(), self._patterns))
            fits, digits = known[tried].fits(texts)
            if fits.all():
                _fill(fields, rows, digits, known[tried])
                return
            if fits.any():
                _fill(fields, rows[fits], digits[fits], known[tried])
                rows, texts = rows[~fits], texts[~fits]
            tried += 1


def _layout(text: bytes, patterns: Sequence[re.Pattern[bytes]]) -> _Layout:
    matches = (pattern.fullmatch(text) for pattern in patterns)
    match = next((match for match in matches if match is not None), None)
    letters = np.frombuffer(text, dtype=np.uint8)
    is_digit = (letters >= ord("0")) & (letters <= ord("9"))
    base = np.where(is_digit, np.uint8(ord("0")), letters)
    spread = np.where(is_digit, np.uint8(9), np.uint8(0))
    if match is None:
        return _Layout(base, spread, None, {})
    groups = {name: match[name] for name in match.re.groupindex if match[name] is not None}
    spans = {name: match.span(name) for name, written in groups.items() if written.isdigit()}
    return _Layout(base, spread, spans, {name: written for name, written in groups.items() if name not in spans})


def _fill(fields: Fields, rows: IntArray, digits: _Bytes, layout: _Layout) -> None:
    if layout.spans is None:
        return

    spans = layout.spans

    def value(name: str) -> _SmallInts:
        return _number(digits, spans.get(name, (0, 0)))

    year, first, second = _date(value, layout)
    clock, possible, leap = _clock(value, layout, digits)
    offset, offset_possible = _offset(value, layout)
    fields.year[rows], fields.first[rows], fields.second[rows] = year, first, second
    fields.clock[rows], fields.offset[rows], fields.leap[rows] = clock, offset, leap
    fields.unsettled[rows] = "A" in spans
    fields.state[rows] = np.where(possible & offset_possible, READ, IMPOSSIBLE)


def _number(digits: _Bytes, span: tuple[int, int]) -> _SmallInts:
    total = np.zeros(len(digits), dtype=np.int32)  # nine digits at most
    for place in range(*span):
        total *= 10
        total += digits[:, place]
    return total


def _date(value: _Value, layout: _Layout) -> tuple[_SmallInts, _SmallInts, _SmallInts]:
    spans = layout.spans or {}
    year = value("Y")
    if "y" in spans:  # two digits: 69…99 are 1969…1999, as POSIX has it
        short = value("y")
        year = short + np.where(short >= 69, 1900, 2000).astype(np.int32)
    if "A" in spans:
        return year, value("A"), value("B")
    month = value("m")
    if "b" in layout.words:
        name = layout.words["b"].decode().lower()
        month = month + np.int32(next(k for k, full in enumerate(MONTHS, start=1) if full.startswith(name)))
    return year, month, value("d")


def _clock(value: _Value, layout: _Layout, digits: _Bytes) -> tuple[IntArray, BoolArray, BoolArray]:
    """Time of day [ns], whether it exists, and whether its second is 60."""
    hour, possible = _hour(value, layout)
    minute, second = value("M"), value("S")
    leap = second == 60
    # A leap second has no place of its own in a count of seconds since 1970. It is put on the last nanosecond of
    # its minute: after every stamp of second 59, before the next minute.
    within = np.where(leap, 60 * SECOND - 1, second * np.int64(SECOND) + _fraction(layout, digits))
    clock = (hour * 60 + minute) * np.int64(60 * SECOND) + within
    possible &= (minute <= 59) & (second <= 60)
    possible &= (hour <= 23) | ((hour == 24) & (clock == 86400 * SECOND))
    return clock, possible, leap


def _fraction(layout: _Layout, digits: _Bytes) -> _SmallInts:
    """Fraction of the second [ns]; digits beyond the nanosecond are dropped, so that order is kept."""
    start, end = (layout.spans or {}).get("f", (0, 0))
    kept = min(end - start, 9)
    return _number(digits, (start, start + kept)) * np.int32(10 ** (9 - kept))


def _hour(value: _Value, layout: _Layout) -> tuple[_SmallInts, BoolArray]:
    half = layout.words.get("p")
    hour = value("I") if "I" in (layout.spans or {}) else value("H")
    if half is None:
        return hour, np.ones(len(hour), dtype=np.bool_)
    possible = (hour >= 1) & (hour <= 12)
    return hour % 12 + np.int32(12 if half[:1] in b"Pp" else 0), possible


def _offset(value: _Value, layout: _Layout) -> tuple[IntArray | np.int64, BoolArray | bool]:
    if "zulu" in layout.words:
        return np.int64(0), True
    if "sign" not in layout.words:
        return np.int64(NO_OFFSET), True
    hours, minutes = value("zh"), value("zm")
    size = (hours * 60 + minutes) * np.int64(60 * SECOND)
    return -size if layout.words["sign"] == b"-" else size, (hours <= 23) & (minutes <= 59)
