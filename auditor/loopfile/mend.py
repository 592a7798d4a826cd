"""A faulty table without its faulty keys, so that the rest of it can still be checked in the same run."""

from __future__ import annotations

import copy
import tomllib
from collections.abc import Iterable
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

from auditor.loopfile.faults import Fault, fields_of, model_at
from auditor.loopfile.lines import KeyPath

_T = TypeVar("_T", bound=BaseModel)


def mended(model: type[_T], value: Any, error: ValidationError) -> _T | None:
    """Return the table with each faulty key left out, or replaced by its example where it may not be left out.

    Nothing but further checks may be made with it; `relevant` drops what they say about the replaced keys.
    None when the table cannot be mended (it is no table at all).
    """
    if not isinstance(value, dict):
        return None
    table = copy.deepcopy(value)
    for detail in error.errors():
        _mend(model, table, detail["loc"])
    try:
        return model.model_validate(table)
    except ValidationError:
        return None


def _mend(model: type[BaseModel], table: dict[str, Any], loc: KeyPath) -> None:
    """Go down to the last table on the way to `loc`, and mend the key in it."""
    at: Any = table
    home, depth = table, 0
    for n, part in enumerate(loc[:-1], start=1):
        try:
            at = at[part]
        except (KeyError, IndexError, TypeError):
            break
        if isinstance(at, dict):
            home, depth = at, n
    if depth >= len(loc):
        return
    key = str(loc[depth])
    home.pop(key, None)
    owner = model_at(model, loc[:depth])
    field = fields_of(owner).get(key) if owner else None
    if field is not None and field.is_required() and field.examples:
        home[key] = tomllib.loads(f"example = {field.examples[0]}")["example"]


def relevant(found: Iterable[Fault], earlier: Iterable[Fault]) -> list[Fault]:
    """Return the faults between keys that do not rest on a key which is at fault by itself."""
    bad = [fault.at for fault in earlier]
    return [fault for fault in found if not any(_touch(path, b) for path in (fault.at, *fault.reads) for b in bad)]


def _touch(one: KeyPath, other: KeyPath) -> bool:
    shorter = min(len(one), len(other))
    return one[:shorter] == other[:shorter]
