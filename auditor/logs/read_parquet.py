"""One Parquet file as a `RawTable`: only the needed columns are read, in the types they are stored with."""

from __future__ import annotations

from pathlib import Path

import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet

from auditor.errors import LogError, Problem, raise_all
from auditor.logs.packed import UNREADABLE, Place, is_packed, open_bytes
from auditor.logs.raw_table import RawTable, Wanted, column_problems, time_columns


def read_parquet(path: Place, label: str, wanted: Wanted) -> RawTable:
    """Read the wanted columns of a Parquet file.

    Parameters
    ----------
    path : Path or Member
    label : str
        What the file is called in errors.
    wanted : Wanted
        The columns to read; no other leaves the disk.

    Raises
    ------
    LogError
        When the file is damaged, lacks a wanted column, has no rows, or holds lists or structures where single
        values are needed.
    """
    try:
        with pa.parquet.ParquetFile(_source(path), read_dictionary=wanted.coded()) as file:
            names = list(file.schema_arrow.names)
            raise_all(LogError, column_problems(wanted, names, label))
            table = file.read(columns=wanted.columns(names))
            _check_letters(table)
    except (pa.ArrowException, *UNREADABLE) as error:
        found = str(error).splitlines()[0]
        raise LogError(
            Problem(what="The Parquet file is damaged.", where=label, found=found, do="write it again")
        ) from None
    if table.num_rows == 0:
        found = f"{len(names)} columns and no row"
        raise LogError(
            Problem(what="The log holds no rows.", where=label, found=found, do="export it again, or leave it out")
        )
    return _raw_table(_single_values(table, wanted, label), wanted, label)


def _source(path: Place) -> Path | pa.BufferReader:
    """Return what to read from: columns are picked out of a file, a packed one has to be unpacked as a whole."""
    if isinstance(path, Path) and not is_packed(path):
        return path
    with open_bytes(path) as file:
        return pa.BufferReader(file.read())


def _check_letters(table: pa.Table) -> None:
    """Have texts looked through, because what works on them takes for granted that they are UTF-8."""
    for column in table.columns:
        if not pa.types.is_primitive(column.type):
            column.validate(full=True)


def _single_values(table: pa.Table, wanted: Wanted, label: str) -> pa.Table:
    """Undo dictionaries of numbers, times and modes, and refuse columns whose cells are no single values."""
    problems = []
    for place, field in enumerate(table.schema):
        if pa.types.is_dictionary(field.type) and field.name not in wanted.coded():
            table = table.set_column(place, field.name, pc.cast(table.column(place), field.type.value_type))
        elif pa.types.is_nested(field.type):
            what = f'Column "{field.name}" does not hold single values.'
            found, do = str(field.type), "write one column per value"
            problems.append(Problem(what=what, where=label, found=found, expected="numbers, texts or times", do=do))
    raise_all(LogError, problems)
    return table


def _raw_table(table: pa.Table, wanted: Wanted, label: str) -> RawTable:
    def column(name: str | None) -> pa.ChunkedArray | None:
        return None if name is None else table.column(name)

    return RawTable(
        label=label,
        times=tuple(table.column(name) for name in time_columns(wanted.time, table.column_names)),
        numbers={name: table.column(name) for name in wanted.numbers},
        mode=column(wanted.mode),
        tag=column(wanted.tag),
        quality=column(wanted.quality),
        locate=lambda row: f"row {row + 1}",
    )
