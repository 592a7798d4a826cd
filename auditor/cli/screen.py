"""Progress on stderr, tables and paragraphs on stdout; 80 columns, no colour when piped."""

from __future__ import annotations

import sys
import textwrap
import time
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager

from auditor.progress import Progress

WIDTH = 80
NARROWEST = 30


@contextmanager
def progress_on_stderr(quiet: bool = False) -> Iterator[Progress]:
    """Yield an observer that keeps one line on stderr up to date (one line per stage when stderr is no terminal)."""
    if quiet or not sys.stderr.isatty():
        yield _lines(quiet)
        return
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn, TimeElapsedColumn, TimeRemainingColumn
    from rich.progress import Progress as Bar

    columns = (TextColumn("{task.description}"), BarColumn(bar_width=24), TimeElapsedColumn(), TimeRemainingColumn())
    with Bar(*columns, console=Console(stderr=True), transient=True) as bar:
        tasks: dict[str, object] = {}

        def observe(stage: str, done: float) -> None:
            if stage not in tasks:
                tasks[stage] = bar.add_task(stage, total=1.0)
            bar.update(tasks[stage], completed=done)  # type: ignore[arg-type]

        yield observe


def _lines(quiet: bool) -> Progress:
    begun: dict[str, float] = {}

    def observe(stage: str, done: float) -> None:
        if quiet:
            return
        if stage not in begun:
            begun[stage] = time.monotonic()
            print(f"{stage} …", file=sys.stderr)

    return observe


def paragraph(text: str, indent: int = 0) -> str:
    """Wrap a text to the screen's width."""
    pad = " " * indent
    return textwrap.fill(text, WIDTH, initial_indent=pad, subsequent_indent=pad, break_long_words=False)


def bullets(texts: Iterable[str]) -> str:
    """Wrap texts as a list."""
    return "\n".join(textwrap.fill(t, WIDTH, initial_indent="- ", subsequent_indent="  ") for t in texts)


def table(head: Sequence[str], rows: Sequence[Sequence[str]], right: Sequence[bool] | None = None) -> str:
    """Lay out a table in plain text; columns flagged `right` are right-aligned, the last one is wrapped to fit."""
    all_rows = [list(head), *[list(r) for r in rows]]
    widths = [max(len(r[i]) for r in all_rows) for i in range(len(head))]
    fixed = sum(widths[:-1]) + 2 * (len(head) - 1)
    widths[-1] = max(8, min(widths[-1], WIDTH - fixed))
    aligned = right or [False] * len(head)
    lines = [line for row in all_rows for line in _row(row, widths, aligned)]
    rule = "  ".join("-" * w for w in widths)
    return "\n".join([lines[0], rule, *lines[1:]])


def table_with_notes(head: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Lay out a table whose last column is running text; below its row, indented, where the column would be narrow."""
    widths = [max(len(row[i]) for row in (head, *rows)) for i in range(len(head) - 1)]
    if WIDTH - sum(widths) - 2 * len(widths) >= NARROWEST:
        return table(head, rows)
    lines = [_short_row(head, widths), "  ".join("-" * width for width in widths)]
    for row in rows:
        lines += [_short_row(row, widths), paragraph(row[-1], indent=4)]
    return "\n".join(lines)


def _short_row(row: Sequence[str], widths: Sequence[int]) -> str:
    return "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=False)).rstrip()


def _row(row: Sequence[str], widths: Sequence[int], right: Sequence[bool]) -> list[str]:
    cells = [c.rjust(w) if r else c.ljust(w) for c, w, r in zip(row[:-1], widths[:-1], right[:-1], strict=True)]
    last = textwrap.wrap(row[-1], widths[-1]) or [""]
    if right[-1]:
        last = [part.rjust(widths[-1]) for part in last]
    pad = " " * (sum(widths[:-1]) + 2 * (len(widths) - 1))
    first = "  ".join([*cells, last[0]]).rstrip()
    return [first, *(pad + part for part in last[1:])]
