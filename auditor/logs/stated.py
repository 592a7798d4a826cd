"""When none of the columns is found: may something the loop file states about the log's dress be wrong?"""

from __future__ import annotations

import contextlib
from collections.abc import Sequence
from dataclasses import replace

from auditor.errors import LogError, Problem
from auditor.logs.dress import Dress, look
from auditor.logs.packed import Place
from auditor.logs.raw_table import Wanted, column_problems
from auditor.loop import LogSource

_KEYS = ("skip_rows", "delimiter", "encoding")
_SHOWN = 8


def stated_amiss(path: Place, label: str, source: LogSource, wanted: Wanted, dress: Dress) -> list[Problem]:
    """Say which stated key of `[log]` hides the columns, and what is found without it.

    Parameters
    ----------
    path : Path or Member
    label : str
        What the file is called in errors.
    source : LogSource
        What the loop file states.
    wanted : Wanted
        The columns of which none was found.
    dress : Dress
        What was found with all that is stated.

    Returns
    -------
    list of Problem
        First the key, then the columns that are missing without it as well; empty when no stated key changes anything.
    """
    stated = [key for key in _KEYS if getattr(source, key) is not None]
    tries = [(key,) for key in stated] + ([tuple(stated)] if len(stated) > 1 else [])
    found = [(keys, names) for keys in tries if (names := _names_without(keys, path, label, source, wanted))]
    found = [(keys, names) for keys, names in found if names != dress.names]
    if not found:
        return []
    keys, names = min(found, key=lambda pair: len(column_problems(wanted, pair[1], label)))
    return [_blamed(keys, names, label, source, dress), *column_problems(wanted, names, label)]


def _names_without(keys: Sequence[str], path: Place, label: str, source: LogSource, wanted: Wanted) -> tuple[str, ...]:
    bare = replace(
        source,
        skip_rows=None if "skip_rows" in keys else source.skip_rows,
        delimiter=None if "delimiter" in keys else source.delimiter,
        encoding=None if "encoding" in keys else source.encoding,
    )
    with contextlib.suppress(LogError):
        return look(path, label, bare, wanted).names
    return ()


def _blamed(keys: Sequence[str], names: Sequence[str], label: str, source: LogSource, dress: Dress) -> Problem:
    written = ", ".join(f"{key} = {_as_written(getattr(source, key))}" for key in keys)
    return Problem(
        what=f"None of the columns is found with {written}: that may be wrong.",
        where=f"[log] {', '.join(keys)}; {label}",
        found=f"with it columns {_shown(dress.names)}",
        expected=f"columns {_shown(names)}, which are found without it",
        do=f"correct {' and '.join(keys)} in [log], or leave {'it' if len(keys) == 1 else 'them'} out",
    )


def _as_written(value: object) -> str:
    return f'"{value}"' if isinstance(value, str) else str(value)


def _shown(names: Sequence[str]) -> str:
    more = f" and {len(names) - _SHOWN} more" if len(names) > _SHOWN else ""
    return ", ".join(f'"{name}"' for name in names[:_SHOWN]) + more
