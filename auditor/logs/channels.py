"""The cells of the joined files as numbers and words, without the values that their quality rules out."""

from __future__ import annotations

from collections.abc import Sequence
from types import MappingProxyType

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.errors import LogError, Problem, raise_all
from auditor.logs.cells import TextArray, read_mode, read_numbers, shown_counts, shown_tally
from auditor.logs.findings.base import Finding
from auditor.logs.parts import Marks, Part, at, joined
from auditor.logs.quality import Grade
from auditor.logs.raw_table import Wanted, for_all, merged

_UNKNOWN_MODE = "bad quality"
_TOLD = MappingProxyType(
    {
        Grade.BAD: ("bad-quality", "values of bad quality", "no number there"),
        Grade.STALE: ("stale-quality", "values that only repeat what was last known", "no number there: no sample"),
        Grade.UNCERTAIN: ("uncertain-quality", "values of uncertain quality", "used"),
    }
)


def read_channels(
    parts: Sequence[Part], wanted: Wanted, time: IntArray
) -> tuple[dict[str, FloatArray], dict[str, TextArray], tuple[Finding, ...]]:
    """Read the number columns and the mode column of the joined files.

    Parameters
    ----------
    parts : sequence of Part
        The files in order.
    wanted : Wanted
        Which of their columns to read.
    time : ndarray of int64, shape (rows,)
        [ns since 1970 UTC], for the findings.

    Returns
    -------
    channels : dict of str to ndarray, shape (rows,)
    texts : dict of str to ndarray of object, shape (rows,)
        Of every column with texts among its numbers or with values ruled out by their quality, and of the mode.
    findings : tuple of Finding

    Raises
    ------
    LogError
        When a column holds no numbers, mostly text, or numbers with digit groups.
    """
    channels: dict[str, FloatArray] = {}
    texts: dict[str, TextArray] = {}
    findings: list[Finding] = []
    problems: list[Problem] = []
    for name in wanted.numbers:
        try:
            channels[name], words = _channel(parts, name)
        except LogError as error:
            problems += error.problems
            continue
        if words is not None:
            findings.append(_text_states(name, words, time))
        words = _with_quality(words, parts)
        if words is not None:
            texts[name] = words
    raise_all(LogError, merged(problems))
    if wanted.mode is not None:
        texts[wanted.mode] = joined([_mode(part) for part in parts])
    return channels, texts, (*findings, *_quality_findings(parts, wanted, time))


def _channel(parts: Sequence[Part], name: str) -> tuple[FloatArray, TextArray | None]:
    read = for_all(lambda part: read_numbers(_usable(part.table.numbers[name], part), part.table, name), parts)
    numbers = joined([values for values, _ in read])
    if all(words is None for _, words in read):
        return numbers, None
    texts = joined([np.full(len(v), None, dtype=object) if w is None else w for v, w in read])
    rows = np.flatnonzero(texts != None)  # noqa: E711 - elementwise
    filled = len(rows) + int(np.isfinite(numbers).sum())
    if len(rows) > filled // 2:
        raise LogError(_mostly_text(parts, name, texts[rows], int(rows[0]), filled))
    return numbers, texts


def _usable(column: pa.ChunkedArray, part: Part) -> pa.ChunkedArray:
    """Empty the cells whose quality rules them out: what stands there is neither number nor state."""
    if part.marks is None:
        return column
    unused = part.marks.rows(Grade.STALE, Grade.BAD)
    return pc.if_else(pa.array(~unused), column, pa.scalar(None, column.type)) if unused.any() else column


def _with_quality(texts: TextArray | None, parts: Sequence[Part]) -> TextArray | None:
    """Keep the code as the text of a value it ruled out: there a held value ends, as it does at the word "Bad"."""
    marks = [part.marks for part in parts if part.marks is not None]
    unused = [mark.rows(Grade.STALE, Grade.BAD) for mark in marks]
    if not any(rows.any() for rows in unused):
        return texts
    words = joined([np.array(mark.words, dtype=object)[mark.codes] for mark in marks])
    others = np.full(len(words), None, dtype=object) if texts is None else texts
    return np.where(joined(unused), words, others)


def _mode(part: Part) -> TextArray:
    """Read the mode; a stale one is empty, so that the last known one stands, a bad one is no known mode."""
    if part.table.mode is None:
        raise ValueError("the table was read without its mode column")
    cells = read_mode(part.table.mode)
    if part.marks is not None:
        cells = np.where(part.marks.rows(Grade.STALE), "", cells)
        cells = np.where(part.marks.rows(Grade.BAD), _UNKNOWN_MODE, cells)
    return cells


def _mostly_text(parts: Sequence[Part], name: str, words: TextArray, first: int, filled: int) -> Problem:
    return Problem(
        what=f'Column "{name}" is mostly text: {len(words)} of {filled} filled cells are no numbers.',
        where=at(parts, first)[0],
        found=shown_counts(words),
        expected="numbers",
        do="name another column; if these are numbers with a unit or a sign behind them, export them without",
    )


def _text_states(name: str, texts: TextArray, time: IntArray) -> Finding:
    rows = texts != None  # noqa: E711 - elementwise
    times = time[rows]
    return Finding(
        kind="text-state",
        start=int(times.min()),
        end=int(times.max()),
        count=len(times),
        detail=shown_counts(texts[rows]),
        effect="no number there; the text is kept",
        signal=name,
    )


def _quality_findings(parts: Sequence[Part], wanted: Wanted, time: IntArray) -> list[Finding]:
    """Tell, for each grade but good, how many values there are and by which codes."""
    marks = [part.marks for part in parts if part.marks is not None]
    if not marks:
        return []
    names = [*wanted.numbers, *([wanted.mode] if wanted.mode is not None else [])]
    signal = names[0] if len(names) == 1 else ""
    rows = {grade: joined([mark.rows(grade) for mark in marks]) for grade in _TOLD}
    return [_of_grade(grade, marks, mask, time, signal) for grade, mask in rows.items() if mask.any()]


def _of_grade(grade: Grade, marks: Sequence[Marks], rows: BoolArray, time: IntArray, signal: str) -> Finding:
    kind, what, effect = _TOLD[grade]
    counts = sum(np.bincount(mark.codes, minlength=len(mark.words)) for mark in marks)
    tally = {
        word: int(count)
        for word, count, own in zip(marks[0].words, np.atleast_1d(counts), marks[0].grades, strict=True)
        if own == grade and count
    }
    return Finding(
        kind=kind,
        start=int(time[rows].min()),
        end=int(time[rows].max()),
        count=int(rows.sum()),
        detail=f"{what}, by code: {shown_tally(tally)}",
        effect=effect,
        signal=signal,
    )
