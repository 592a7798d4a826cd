"""Read a loop file: bytes, then TOML, then tables, then what must hold between them, then the `Loop`."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar

from pydantic import ValidationError

from auditor.errors import LoopFileError, Problem, raise_all
from auditor.loop import Loop, RuleRequest
from auditor.loopfile import faults as fault_room
from auditor.loopfile.checks import (
    check_channel,
    check_clocks,
    check_controller,
    check_limits,
    check_log,
    check_signals,
    unsupported,
)
from auditor.loopfile.convert import Tables, check_exclusions, to_loop
from auditor.loopfile.faults import Fault
from auditor.loopfile.gains import gains_in_words
from auditor.loopfile.lines import KeyPath, key_lines, line_of
from auditor.loopfile.mend import mended, relevant
from auditor.loopfile.schema import REQUIRED, TABLES, RuleTable, Table
from auditor.loopfile.settings import read_settings
from auditor.text import nearest_file

_T = TypeVar("_T", bound=Table)
# A comma between digits where one number is expected; a number never begins with a nought before other digits.
_DECIMAL_COMMA = re.compile(r"=\s*([-+]?\d+),(\d+)(?=\s*(?:[,}#]|$))|(?<=[\[,\s])([-+]?\d+),(0\d+)\b")
_AT_LINE = re.compile(r"\s*\(at (?:line (\d+), column (\d+)|end of document)\)")


@dataclass(frozen=True, slots=True)
class _Source:
    """A loop file that is valid TOML."""

    path: Path
    text: str
    raw: Mapping[str, Any]


def read_loop(path: str | Path) -> Loop:
    """Read and check a loop file.

    Parameters
    ----------
    path : str or Path
        A TOML file in UTF-8.

    Returns
    -------
    Loop
        Durations in seconds, exclusions in ns since 1970 UTC, the controller in the ideal form. `[failsafe]` and
        `[energy]` are kept in `extras` with quantities in SI (``per_update_j``, ``idle_w``, ``after_s``, …).

    Raises
    ------
    LoopFileError
        When the file cannot be read, is not TOML, or anything in it is unknown, missing, out of range or
        contradicts something else; carries every problem found.
    """
    source = _source(Path(path))
    return to_loop(_tables(source), source.path.absolute())


def controller_in_words(path: str | Path) -> str | None:
    """Tell the controller gains of a loop file as stated and as converted to the ideal form.

    Returns
    -------
    str or None
        None when the file has no `[controller]`.

    Raises
    ------
    LoopFileError
        As `read_loop`.
    """
    tables = _tables(_source(Path(path)))
    if tables.controller is None:
        return None
    return gains_in_words(tables.controller, tables.signals.actuator, tables.signals.measurement.unit)


def _source(path: Path) -> _Source:
    text = _text(path)
    try:
        return _Source(path, text, tomllib.loads(text))
    except tomllib.TOMLDecodeError as error:
        raise LoopFileError(_syntax(str(error), path, text)) from None


def _text(path: Path) -> str:
    if path.is_dir():
        files = ", ".join(sorted(p.name for p in path.glob("*.toml"))) or "no .toml file in it"
        raise LoopFileError(_unreadable(path, "is a folder", files, "name one loop file"))
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        names = [p.name for p in path.parent.glob("*.toml")] if path.parent.is_dir() else []
        near = nearest_file(path.name, names)
        do = f'did you mean "{near}"?' if near else "check the path"
        raise LoopFileError(_unreadable(path, "does not exist", _there(names), do)) from None
    except OSError as error:
        raise LoopFileError(_unreadable(path, "cannot be opened", error.strerror or str(error), "check it")) from None
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        where = f"{path}, line {line}"
        problem = Problem(
            what="the loop file is not UTF-8 text",
            where=where,
            found=f"byte 0x{data[error.start]:02x}",
            expected="UTF-8",
            do="save the file with the encoding UTF-8",
        )
        raise LoopFileError(problem) from None


def _there(names: list[str]) -> str:
    return f"loop files in that folder: {', '.join(sorted(names)[:8]) or 'none'}"


def _unreadable(path: Path, what: str, found: str, do: str) -> Problem:
    return Problem(what=f"the loop file {what}", where=str(path), found=found, expected="a TOML file", do=do)


def _syntax(message: str, path: Path, text: str) -> Problem:
    at = _AT_LINE.search(message)
    rows = text.splitlines() or [""]
    line = int(at[1]) if at and at[1] else len(rows)
    row = rows[min(line, len(rows)) - 1].strip()
    do = "correct the line; the file follows the rules of TOML 1.0"
    if "\\" in row and "'" not in row:
        do = r"a backslash in a path is written 'C:\data\log.csv' (single quotes) or with / instead"
    where = f"{path}, line {line}" + (f", column {at[2]}" if at and at[2] else "")
    what = f"the loop file is not valid TOML: {_AT_LINE.sub('', message)}"
    comma = _DECIMAL_COMMA.search(row)
    if comma:
        what = "the loop file has a number with a decimal comma"
        do = f"use a point: {'.'.join(part for part in comma.groups() if part)}"
        return Problem(what=what, where=where, found=row, expected="numbers with a decimal point", do=do)
    return Problem(what=what, where=where, found=row, expected="TOML", do=do)


def _tables(source: _Source) -> Tables:
    """Validate every table, check them against each other, and raise all faults at once."""
    raw, faults = unsupported(source.raw)
    owners = _owners()
    found: dict[str, Any] = {}
    for key, value in raw.items():
        if key in TABLES:
            found[key], more = _validated(TABLES[key], value, (key,), owners)
            faults += more
        elif key != "rules":
            faults.append(fault_room.unknown_key((key,), (*TABLES, "rules"), owners))
    faults += [_missing_table(name) for name in REQUIRED if name not in raw]
    requests, more = _rules(raw.get("rules", []), owners)
    faults += more
    faults += relevant(_between_keys(found), faults)
    _raise(faults, source)
    return Tables(**found, rules=requests)


def _owners() -> dict[str, list[str]]:
    """For every key of the top-level tables, the tables that know it."""
    owners: dict[str, list[str]] = {}
    models: dict[str, type[Table]] = {**TABLES, "rules": RuleTable}
    for name, model in models.items():
        for key in fault_room.fields_of(model):
            owners.setdefault(key, []).append(f"[{name}]")
    return owners


def _validated(
    model: type[_T], value: Any, at: KeyPath, owners: Mapping[str, list[str]]
) -> tuple[_T | None, list[Fault]]:
    """Return the table and its faults; a table with faults is mended, for further checks only."""
    try:
        return model.model_validate(value), []
    except ValidationError as error:
        return mended(model, value, error), fault_room.from_validation(error, at, model, owners)


def _missing_table(name: str) -> Fault:
    return Fault(at=(name,), what=f"the table [{name}] is missing", expected=f"[{name}]", do=f"add [{name}]")


def _rules(value: Any, owners: Mapping[str, list[str]]) -> tuple[tuple[RuleRequest, ...], list[Fault]]:
    if not isinstance(value, list):
        what, do = "rules is not a list of tables", "write [[rules]] with two brackets; it may be repeated"
        found = fault_room.as_written(value)
        return (), [Fault(at=("rules",), what=what, found=found, expected="[[rules]]", do=do)]
    requests: list[RuleRequest] = []
    faults: list[Fault] = []
    for n, written in enumerate(value):
        request, more = _rule(written, ("rules", n), owners)
        faults += more
        requests += [request] if request else []
    return tuple(requests), faults


def _rule(written: Any, at: KeyPath, owners: Mapping[str, list[str]]) -> tuple[RuleRequest | None, list[Fault]]:
    table, faults = _validated(RuleTable, written, at, owners)
    fixed = tuple(fault_room.fields_of(RuleTable))
    plain = {key: value for key, value in written.items() if key not in fixed} if isinstance(written, dict) else {}
    settings, more = read_settings(plain, at, fixed)
    if table is None:
        return None, faults + more
    request = RuleRequest(
        rule=table.rule, link=table.link, signal=table.signal, between=table.between, settings=settings
    )
    return request, faults + more


def _between_keys(found: Mapping[str, Any]) -> Iterator[Fault]:
    signals, log = found.get("signals"), found.get("log")
    controller, limits = found.get("controller"), found.get("limits")
    if log is not None:
        yield from check_log(log)
        yield from check_exclusions(log)
    if signals is not None:
        yield from check_signals(signals)
    if log is not None and signals is not None:
        yield from check_clocks(log, signals)
    if controller is not None:
        yield from check_controller(controller, signals.actuator if signals else None)
    if limits is not None:
        yield from check_limits(limits, signals)
    if found.get("channel") is not None:
        yield from check_channel(found["channel"])


def _raise(faults: list[Fault], source: _Source) -> None:
    lines = key_lines(source.text)
    faulty = {fault.at for fault in faults}
    faults += [fault for fault in fault_room.waiting(source.text, source.raw, lines) if fault.at not in faulty]
    where = {fault.at: line_of(fault.at, lines) for fault in faults}
    raise_all(LoopFileError, fault_room.problems(faults, str(source.path), source.text, where))
