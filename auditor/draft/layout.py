"""Logs with one row per (time, tag, value): seen, and turned into one column per tag."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import read_only
from auditor.draft.columns import Column
from auditor.draft.words import names, unit_of

MOST_TAGS = 40
LEAST_ROWS = 20


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Long:
    """A long layout: the columns of tag, value and quality, and the signals by tag (on the rows of the log)."""

    tag: str
    value: str
    quality: str | None
    tags: int
    columns: tuple[Column, ...]


def find_long(columns: Sequence[Column], time: str) -> Long | None:
    """Return the long layout, None when the log is wide.

    Parameters
    ----------
    columns : sequence of Column
    time : str
        The time column.
    """
    rest = [column for column in columns if column.name != time]
    quality = next((column.name for column in rest if names(column.name, "quality")), None)
    rest = [column for column in rest if column.name != quality and not names(column.name, "index")]
    values = [column for column in rest if column.is_number]
    texts = [column for column in rest if not column.is_number and _tags(column)]
    if len(values) != 1 or not texts:
        return None
    value, tag = values[0], max(texts, key=lambda column: len(_tags(column)))
    found = _tags(tag)
    return Long(
        tag=tag.name,
        value=value.name,
        quality=quality,
        tags=len(found),
        columns=tuple(of_tag(tag, value, name) for name in found[:MOST_TAGS]),
    )


def _tags(column: Column) -> list[str]:
    """Return the texts that stand in many rows, the most frequent first; empty unless there are two to 500 of them."""
    if not pa.types.is_string(column.cells.type) and not pa.types.is_large_string(column.cells.type):
        return []
    counted = pc.value_counts(pc.drop_null(column.cells)).to_pylist()
    if not 2 <= len(counted) <= 500:
        return []
    ordered = sorted(counted, key=lambda pair: (-pair["counts"], pair["values"]))
    return [pair["values"] for pair in ordered if pair["counts"] >= LEAST_ROWS]


def of_tag(tag: Column, value: Column, name: str) -> Column:
    """Return the values of one tag as a column on the rows of the log, empty in the rows of the others."""
    mine = pc.fill_null(pc.equal(tag.cells, name), False)
    rows = np.asarray(mine.to_numpy(), dtype=np.bool_)
    numbers = np.where(rows, value.numbers, np.nan)
    cells = pc.if_else(mine, value.cells, pa.scalar(None, value.cells.type))
    filled = len(cells) - cells.null_count
    return Column(
        name=name,
        unit=unit_of(name),
        cells=cells,
        numbers=read_only(numbers),
        filled=filled / max(int(rows.sum()), 1),
        numeric=float(np.isfinite(numbers).sum()) / max(filled, 1),
    )
