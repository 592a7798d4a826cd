"""The files of a copy, and the key beside the owner's loop file."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.disguise.hide import NAME
from auditor.disguise.key import key_text
from auditor.disguise.make import Disguised
from auditor.disguise.page import loop_text
from auditor.errors import OutputError, Problem, raise_all
from auditor.files import write_text
from auditor.logs.log import Log


def key_path(loopfile: Path, folder: Path) -> Path:
    """Where the key of a copy is kept: beside the loop file, named after it and the copy's folder."""
    return loopfile.resolve().parent / f"{loopfile.stem}.{folder.resolve().name}.key.json"


def check_targets(loopfile: Path, folder: Path) -> None:
    """See that nothing would be overwritten and that the key would not lie among the files to be shared.

    Raises
    ------
    OutputError
        One of the files is there already, or the loop file lies in the folder.
    """
    problems = [
        Problem(what="the file is already there", where=str(path), do="give another folder with --out, or remove it")
        for path in _targets(loopfile, folder)
        if path.exists()
    ]
    if loopfile.resolve().is_relative_to(folder.resolve()):
        problems.append(
            Problem(
                what="the key would lie in the folder that is to be shared",
                where=str(folder),
                found="the loop file lies in it",
                do="give another folder with --out",
            )
        )
    raise_all(OutputError, problems)


def write_disguised(copy: Disguised, loopfile: Path, folder: Path) -> tuple[Path, Path, Path]:
    """Write a copy and its key; return the paths of loop file, log and key.

    Raises
    ------
    OutputError
        See `check_targets`, or a folder cannot be written; no file is left behind then.
    """
    check_targets(loopfile, folder)
    page, log, key = _targets(loopfile, folder)
    texts = {key: key_text(copy.key), log: log_text(copy.log), page: loop_text(copy.loop)}
    try:
        for path, text in texts.items():
            write_text(path, text, replace=False)
    except OutputError:
        for path in (path for path in texts if path.is_file()):
            path.unlink()
        raise
    return page, log, key


def _targets(loopfile: Path, folder: Path) -> tuple[Path, Path, Path]:
    return folder / f"{NAME}.toml", folder / f"{NAME}.csv", key_path(loopfile, folder)


def log_text(log: Log) -> str:
    """Write a log as CSV; every number with as many digits as it needs to come back the same.

    One row per time; one per time and tag where columns have rows of their own.
    """
    stamps = _stamps(log)
    columns = {name: _cells(log, name, values) for name, values in log.channels.items()}
    if "mode" in log.texts:
        columns["mode"] = log.texts["mode"].tolist()
    if log.own:
        rows = ((stamps[k], name, cells[k]) for name, cells in columns.items() for k in np.flatnonzero(_own(log, name)))
        return _lines(("time", "tag", "value"), rows)
    return _lines(("time", *columns), zip(stamps, *columns.values(), strict=True))


def _lines(head: Iterable[str], rows: Iterable[Iterable[str]]) -> str:
    return "\n".join([",".join(head), *(",".join(row) for row in rows)]) + "\n"


def _own(log: Log, name: str) -> BoolArray:
    return log.own[name] if name in log.own else np.ones(len(log.time), dtype=np.bool_)


def _stamps(log: Log) -> list[str]:
    stamps = log.time.astype("datetime64[ns]")
    whole = not np.any(log.time % 1_000_000_000)
    return [f"{stamp}Z" for stamp in (stamps.astype("datetime64[s]") if whole else stamps).astype(str).tolist()]


def _cells(log: Log, name: str, values: FloatArray) -> list[str]:
    numbers = ["" if value != value else repr(value) for value in values.tolist()]
    words = log.texts.get(name)
    if words is None:
        return numbers
    return [number if word is None else word for number, word in zip(numbers, words.tolist(), strict=True)]
