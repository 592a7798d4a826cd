"""Every row of a few columns, where a log was looked at in parts only and is not too large for it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet

from auditor.draft.columns import Column, columns_of
from auditor.draft.dress import Dress
from auditor.draft.layout import Long, of_tag
from auditor.draft.peek import Peek, files_of, is_packed

MOST_BYTES = 200_000_000
PACKED = 10
"""Bytes that one byte of a packed log is taken for."""


def whole_columns(path: Path, peek: Peek, names: Sequence[str], long: Long | None) -> tuple[Column, ...] | None:
    """Read all rows of some signals.

    Parameters
    ----------
    path : Path
        The log.
    peek : Peek
        What is known of it.
    names : sequence of str
        Columns, or tags of a long log.
    long : Long or None

    Returns
    -------
    tuple of Column or None
        None when the peek is the whole already, when the log is larger than `MOST_BYTES`, or cannot be read as one.
    """
    files = files_of(path)
    if peek.whole or sum(_size(file) for file in files) > MOST_BYTES:
        return None
    needed = sorted({long.tag, long.value} if long else set(names), key=peek.names.index)
    try:
        parts = tuple(_read(file, peek, needed) for file in files)
        columns = columns_of(_narrowed(peek, parts, needed))
    except (pa.ArrowException, KeyError, UnicodeError, OSError):
        return None
    if long is None:
        return columns
    by_name = {column.name: column for column in columns}
    return tuple(of_tag(by_name[long.tag], by_name[long.value], name) for name in dict.fromkeys(names))


def _size(file: Path) -> int:
    return file.stat().st_size * (PACKED if is_packed(file) else 1)


def _narrowed(peek: Peek, parts: tuple[pa.Table, ...], needed: Sequence[str]) -> Peek:
    places = [peek.names.index(name) for name in needed]
    written, units = (tuple(texts[place] for place in places) for texts in (peek.written, peek.units))
    return replace(peek, parts=parts, written=written, units=units, whole=True)


def _read(file: Path, peek: Peek, needed: Sequence[str]) -> pa.Table:
    if peek.dress is None:
        return pa.parquet.read_table(file, columns=list(needed), partitioning=None).select(list(needed))
    return _read_text(file, peek.names, peek.dress, needed)


def _read_text(file: Path, names: Sequence[str], dress: Dress, needed: Sequence[str]) -> pa.Table:
    with pa.input_stream(str(file), compression="gzip" if is_packed(file) else None) as stream:
        return pyarrow.csv.read_csv(
            stream,
            read_options=pyarrow.csv.ReadOptions(
                column_names=list(names), skip_rows=dress.body, encoding=dress.encoding
            ),
            parse_options=pyarrow.csv.ParseOptions(delimiter=dress.delimiter, invalid_row_handler=lambda _: "skip"),
            convert_options=pyarrow.csv.ConvertOptions(
                column_types={name: pa.string() for name in names},
                include_columns=list(needed),
                strings_can_be_null=True,
                null_values=[""],
            ),
        )
