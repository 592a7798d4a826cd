"""Faults of a loop file: what is wrong at which key, and their way to problems with file and line."""

from __future__ import annotations

import datetime
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, get_args

from pydantic import BaseModel, ValidationError
from pydantic.fields import FieldInfo
from pydantic_core import ErrorDetails

from auditor.errors import Problem
from auditor.loopfile.lines import KeyPath
from auditor.text import FILL_IN, nearest

_EXPECTED: Mapping[str, str] = MappingProxyType(
    {
        "float_type": "a number",
        "int_type": "a whole number",
        "int_from_float": "a whole number",
        "string_type": "text in quotes",
        "bool_type": "true or false",
        "list_type": "a list in [ ]",
        "model_type": "a table",
        "finite_number": "a finite number",
        "greater_than": "more than {gt:g}",
        "greater_than_equal": "{ge:g} or more",
        "less_than": "less than {lt:g}",
        "less_than_equal": "at most {le:g}",
        "literal_error": "{expected}",
        "too_short": "at least {min_length} value(s)",
        "too_long": "at most {max_length} value(s)",
    }
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Fault:
    """One thing that is wrong at one key; the parts are those of `Problem`.

    `reads` are the other keys it rests on: it is not raised when one of them is at fault by itself.
    `means` is the key that an unknown key most likely stands for.
    """

    at: KeyPath
    what: str
    found: str = ""
    expected: str = ""
    do: str = ""
    reads: tuple[KeyPath, ...] = ()
    means: str | None = None


def in_words(path: KeyPath) -> str:
    """Write a key path as people read it: ``signals.disturbances no. 2.column``."""
    words = ""
    for part in path:
        words += f" no. {part + 1}" if isinstance(part, int) else f".{part}" if words else part
    return words


def as_written(value: object) -> str:
    """Write a value about as the file writes it, cut short when it is long."""
    if isinstance(value, bool):
        text = str(value).lower()
    elif isinstance(value, str):
        text = f'"{value}"'
    elif isinstance(value, (datetime.datetime, datetime.date, datetime.time)):
        text = value.isoformat()
    elif isinstance(value, list):
        text = f"[{', '.join(as_written(v) for v in value)}]"
    elif isinstance(value, dict):
        text = f"{{ {', '.join(f'{k} = {as_written(v)}' for k, v in value.items())} }}"
    else:
        text = str(value)
    return text if len(text) <= 70 else text[:67] + "…"


def waiting(text: str, tables: Mapping[str, Any], lines: Mapping[KeyPath, int]) -> list[Fault]:
    """Return a fault for every empty value on a line that is marked FILL IN."""
    rows = text.splitlines()
    return [
        Fault(
            at=path, what=f"{in_words(path)} is empty", found='""', expected="a value", do="write it between the quotes"
        )
        for path, line in lines.items()
        if FILL_IN in rows[line - 1] and _value_at(tables, path) == ""
    ]


def _value_at(tables: Mapping[str, Any], path: KeyPath) -> Any:
    value: Any = tables
    for part in path:
        try:
            value = value[part]
        except (KeyError, IndexError, TypeError):
            return None  # a key that is written with escapes; it is found by its table only
    return value


def problems(faults: Iterable[Fault], file: str, text: str, line: Mapping[KeyPath, int | None]) -> list[Problem]:
    """Return the faults as problems, in the order of the file.

    Parameters
    ----------
    faults : iterable of Fault
    file : str
        Name of the loop file as the reader knows it.
    text : str
        The file itself, to see which lines wait to be filled in.
    line : mapping of key path to int or None
        Line of each fault's key.
    """
    rows = text.splitlines()
    ordered = sorted(faults, key=lambda fault: line[fault.at] or 0)
    return [_problem(fault, file, rows, line[fault.at]) for fault in ordered]


def _problem(fault: Fault, file: str, rows: Sequence[str], line: int | None) -> Problem:
    place = file if line is None else f"{file}, line {line}"
    do = fault.do
    if line is not None and FILL_IN in rows[line - 1]:
        do = f"this line waits to be filled in by you (it is marked FILL IN){'; ' + do if do else ''}"
    where = f"{place}: {in_words(fault.at)}" if fault.at else place
    return Problem(what=fault.what, where=where, found=fault.found, expected=fault.expected, do=do)


def from_validation(
    error: ValidationError, table: KeyPath, model: type[BaseModel], owners: Mapping[str, Sequence[str]]
) -> list[Fault]:
    """Turn what pydantic found in one table into faults.

    Parameters
    ----------
    error : ValidationError
    table : key path
        Where the table stands in the file.
    model : type
        The table's model.
    owners : mapping of str to sequence of str
        For every key of the loop file, the tables that know it.
    """
    details = error.errors()
    found = [_fault(detail, table, model, owners) for detail in details]
    meant = {(*fault.at[:-1], fault.means) for fault in found if fault.means}
    return [
        fault
        for fault, detail in zip(found, details, strict=True)
        if not (detail["type"] == "missing" and fault.at in meant)
    ]


def _fault(detail: ErrorDetails, table: KeyPath, model: type[BaseModel], owners: Mapping[str, Sequence[str]]) -> Fault:
    at = (*table, *detail["loc"])
    kind, context = detail["type"], detail.get("ctx", {})
    if kind == "extra_forbidden":
        owner = model_at(model, detail["loc"][:-1])
        return unknown_key(at, list(fields_of(owner)) if owner else [], owners)
    if kind == "missing":
        return _missing(at, model_at(model, detail["loc"][:-1]))
    expected = context.get("wanted") or _EXPECTED.get(kind, detail["msg"]).format(**context)
    do = str(context.get("do") or _hint(kind, detail["input"], str(expected)))
    what = str(context.get("what", "cannot be used")).strip()
    return Fault(at=at, what=f"{in_words(at)} {what}", found=as_written(detail["input"]), expected=str(expected), do=do)


def unknown_key(at: KeyPath, known: Sequence[str], owners: Mapping[str, Sequence[str]]) -> Fault:
    """Return the fault of a key that its table does not know, with the nearest key it does know."""
    key = str(at[-1])
    place = f"[{in_words(at[:-1])}]" if len(at) > 1 else "the file's top level"
    near = nearest(key, known)
    home = " or ".join(name for name in owners.get(key, ()) if name != place)
    do = f'did you mean "{near}"?' if near else f"move it to {home}, or remove it" if home else "remove it"
    if near and home:
        do += f" ({key} belongs to {home})"
    what = f'unknown key "{key}" in {place}'
    return Fault(at=at, what=what, found=key, expected=", ".join(known), do=do, means=near)


def _missing(at: KeyPath, model: type[BaseModel] | None) -> Fault:
    key = str(at[-1])
    field = fields_of(model).get(key) if model else None
    example = field.examples[0] if field and field.examples else "…"
    expected = (field.description if field else None) or "a value"
    return Fault(at=at, what=f"{in_words(at)} is missing", expected=expected, do=f"add  {key} = {example}")


def fields_of(model: type[BaseModel]) -> dict[str, FieldInfo]:
    """Return the fields of a table by the key the file writes."""
    return {field.alias or name: field for name, field in model.model_fields.items()}


def model_at(model: type[BaseModel], loc: Sequence[str | int]) -> type[BaseModel] | None:
    """Return the model of the table at `loc` below `model`, None when there is none."""
    current: type[BaseModel] | None = model
    for part in loc:
        if isinstance(part, int):
            continue
        fields = fields_of(current) if current else {}
        current = _model_in(fields[part].annotation) if part in fields else None
    return current


def _model_in(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((found for part in get_args(annotation) if (found := _model_in(part))), None)


def _hint(kind: str, value: object, expected: str) -> str:
    """Say what to do about the commonest slips."""
    if kind == "float_type" and isinstance(value, str):
        return "write the number without quotes and with a decimal point"
    if kind == "string_type" and isinstance(value, (int, float)):
        return f'put it in quotes: "{as_written(value)}"'
    if kind == "list_type" and not isinstance(value, dict):
        return f"put it in brackets: [{as_written(value)}]"
    if kind == "literal_error" and isinstance(value, str):
        near = nearest(value, [word.strip("'") for word in expected.replace(" or ", ", ").split(", ")])
        return f'did you mean "{near}"?' if near else "use one of the expected words"
    return "correct the value"
