"""The settings of a `[[rules]]` table: scalars, lists and log-spaced ranges, all of them tuples in the end."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, TypeAlias

import numpy as np

from auditor.loopfile.durations import SECONDS, is_duration, quantity, seconds
from auditor.loopfile.faults import Fault, as_written, in_words
from auditor.loopfile.lines import KeyPath
from auditor.text import nearest

Values: TypeAlias = tuple[float, ...]

GUARDS = ("max_silence", "min_gap")
SPAN_KEYS = ("from", "to", "count")
LARGEST_COUNT = 10_000
_EXPECTED = 'a number, a duration such as "60s", a list of them, or { from = 0.002, to = 0.1, count = 12 }'


@dataclass(frozen=True, slots=True)
class Setting:
    """One setting as read: its key in the `RuleRequest`, and either its values or what is wrong with it."""

    key: str
    values: Values = ()
    fault: Fault | None = None


def read_settings(
    table: Mapping[str, Any], at: KeyPath, fixed: tuple[str, ...]
) -> tuple[Mapping[str, Values], list[Fault]]:
    """Read all settings of one `[[rules]]` table.

    Parameters
    ----------
    table : mapping of str to object
        The settings as written.
    at : key path
        Where the table stands in the file.
    fixed : tuple of str
        The keys that every rule knows, to recognise a slip of the pen.

    Returns
    -------
    settings : mapping of str to tuple of float
        Durations are in seconds under the key with ``_s`` behind it.
    faults : list of Fault
    """
    found: dict[str, Values] = {}
    faults: list[Fault] = []
    for key, written in table.items():
        setting = _read(key, written, (*at, key), fixed)
        if setting.fault is not None:
            faults.append(setting.fault)
        elif setting.key in found:
            faults.append(_twice((*at, key), setting.key))
        else:
            found[setting.key] = setting.values
    return MappingProxyType(found), faults


def _read(key: str, written: Any, at: KeyPath, fixed: tuple[str, ...]) -> Setting:
    members = [written[k] for k in ("from", "to") if k in written] if isinstance(written, dict) else written
    members = members if isinstance(members, list) else [members]
    timed = key in GUARDS or any(is_duration(member) for member in members)
    name = f"{key}_s" if timed and not key.endswith("_s") else key
    if isinstance(written, dict):
        return _span(name, written, timed, at)
    values = tuple(_number(member, timed) for member in members)
    good = tuple(value for value in values if value is not None)
    if len(good) < len(values) or not good:
        return Setting(name, fault=_unusable(key, written, at, fixed))
    return Setting(name, good, _guard_fault(name, good, at))


def _number(value: Any, timed: bool) -> float | None:
    """Return a value in SI, None when it is not a finite number."""
    try:
        number = quantity(value, SECONDS if timed else {})
    except ValueError:
        return None
    return number if np.isfinite(number) else None


def _span(name: str, written: Mapping[str, Any], timed: bool, at: KeyPath) -> Setting:
    """Read ``{ from, to, count }`` as log-spaced values, both ends exactly as written."""
    unknown = [key for key in written if key not in SPAN_KEYS]
    if unknown:
        near = nearest(unknown[0], SPAN_KEYS)
        do = f'did you mean "{near}"?' if near else "remove it"
        what = f'unknown key "{unknown[0]}" in {in_words(at)}'
        return Setting(
            name, fault=Fault(at=(*at, unknown[0]), what=what, found=unknown[0], expected=", ".join(SPAN_KEYS), do=do)
        )
    low, high = _number(written.get("from"), timed), _number(written.get("to"), timed)
    count = written.get("count")
    whole = count if isinstance(count, int) and not isinstance(count, bool) else 0
    if low is None or high is None or not 0 < low < high or not 2 <= whole <= LARGEST_COUNT:
        return Setting(name, fault=_bad_span(written, at))
    values = np.geomspace(low, high, whole)
    values[0], values[-1] = low, high
    return Setting(name, tuple(float(value) for value in values))


def _bad_span(written: Mapping[str, Any], at: KeyPath) -> Fault:
    return Fault(
        at=at,
        what=f"{in_words(at)} is not a range of values",
        found=as_written(dict(written)),
        expected=f"from and to above zero, from below to, and a whole count of 2 to {LARGEST_COUNT}",
        do="write it like { from = 0.002, to = 0.1, count = 12 }",
    )


def _guard_fault(name: str, values: Values, at: KeyPath) -> Fault | None:
    lowest = min(values)
    if (name == "max_silence_s" and lowest <= 0) or (name == "min_gap_s" and lowest < 0):
        expected = "a duration above zero" if name == "max_silence_s" else "a duration of zero or more"
        return Fault(
            at=at, what=f"{in_words(at)} is out of range", found=f"{lowest:g} s", expected=expected, do="correct it"
        )
    return None


def _unusable(key: str, written: Any, at: KeyPath, fixed: tuple[str, ...]) -> Fault:
    near = nearest(key, (*fixed, *GUARDS)) if isinstance(written, str) else None
    do = f'did you mean "{near}"?' if near and near != key else "correct the value"
    if isinstance(written, str) and _is_plain_number(written):
        do = "write the number without quotes"
    return Fault(at=at, what=f"{in_words(at)} cannot be used", found=as_written(written), expected=_EXPECTED, do=do)


def _is_plain_number(text: str) -> bool:
    try:
        seconds(f"{text}s")
    except ValueError:
        return False
    return True


def _twice(at: KeyPath, key: str) -> Fault:
    return Fault(at=at, what=f"{in_words(at)} is stated twice", found=key, expected="one of the two", do="remove one")
