"""Single values of a loop file that need more than a type: durations, moments, names, codes."""

from __future__ import annotations

import codecs
import datetime
import zoneinfo
from collections.abc import Callable, Mapping
from typing import Annotated, Any, Literal, NoReturn, TypeAlias

from pydantic import AfterValidator, BeforeValidator
from pydantic_core import PydanticCustomError

from auditor.loopfile.durations import JOULES, SECONDS, WATTS, quantity
from auditor.text import nearest


def _refuse(what: str, expected: str, do: str) -> NoReturn:
    raise PydanticCustomError("value", "{what}", {"what": what, "wanted": expected, "do": do})


def _reader(units: Mapping[str, float], kind: str, example: str) -> Callable[[Any], float]:
    def read(value: Any) -> float:
        try:
            return quantity(value, units)
        except ValueError:
            _refuse(f"is not {kind}", f"a number and one of {', '.join(units)}", _unit_hint(value, units, example))

    return read


def _unit_hint(value: object, units: Mapping[str, float], example: str) -> str:
    unit = value.strip().lstrip("+-0123456789.,eE ") if isinstance(value, str) else ""
    near = "min" if unit in ("m", "mins", "minutes", "Min") and "min" in units else nearest(unit, units)
    return f'did you mean "{near}" instead of "{unit}"?' if unit and near else f"write it like {example}"


def _not_blank(value: str) -> str:
    if not value.strip():
        _refuse("is empty", "text that is not empty", "fill it in, or remove the key")
    return value


def _folder_name(value: str) -> str:
    _not_blank(value)
    if any(sign in '/\\:*?"<>|' or ord(sign) < 32 for sign in value) or set(value) <= {"."}:
        _refuse("cannot name a folder", 'a name without / \\ : * ? " < > |', "use letters, digits, spaces and -")
    return value


def _paths(value: Any) -> list[str]:
    paths = value if isinstance(value, list) else [value]
    if not paths or not all(isinstance(path, str) for path in paths):
        _refuse("is not a path", "a path in quotes, or a list of them", 'write it like "pool-7.csv"')
    for path in paths:
        _not_blank(path)
    return paths


def _zone(value: str) -> str:
    _not_blank_zone(value)
    try:
        zoneinfo.ZoneInfo(value)
    except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError):
        near = nearest(value, zoneinfo.available_timezones())
        do = f'did you mean "{near}"?' if near else "see the list of the IANA time zone database"
        _refuse("is not a time zone", 'an IANA name such as "UTC" or "Europe/Lisbon"', do)
    return value


def _not_blank_zone(value: str) -> None:
    if not value.strip():
        expected = 'an IANA name such as "UTC" or "Europe/Lisbon"'
        _refuse("is empty", expected, "state the zone of the clock that stamped the log")


def _encoding(value: str) -> str:
    try:
        codecs.lookup(value)
    except LookupError:
        _refuse("is not a text encoding", 'a name such as "utf-8", "cp1252", "utf-16"', "correct or remove it")
    return value


def _one_character(value: str) -> str:
    if len(value) != 1:
        _refuse("is not one character", 'one character, such as ";" or "\\t"', "write the one that parts the columns")
    return value


def _codes(value: Any) -> list[Any]:
    codes = value if isinstance(value, list) else None
    if codes is None or not all(isinstance(code, (str, int, float)) for code in codes):
        _refuse("is not a list of values", "a list of texts or numbers", 'write it like ["AUTO"] or [192, 216]')
    return codes


def _moment(value: Any) -> datetime.datetime:
    if isinstance(value, datetime.datetime):
        return value
    if isinstance(value, datetime.date):
        return datetime.datetime.combine(value, datetime.time())
    try:
        return datetime.datetime.fromisoformat(value.strip().upper())
    except (ValueError, AttributeError):
        _refuse("is not a date and time", "RFC 3339", 'write it like "2025-03-01T00:00Z"')


def _integral_time(value: Any) -> float | Literal["none"]:
    if value == "none":
        return "none"
    ti = _reader(SECONDS, "a duration", '"600s"')(value)
    if not 0 < ti < float("inf"):
        _refuse("is not a time above zero", 'a duration above zero, or "none"', 'write "none" for no integral action')
    return ti


def _fail_action(value: Any) -> float | Literal["hold"]:
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        return float(value)
    if value != "hold":
        _refuse("is not an action", '"hold" or an actuator value', 'write "hold" or a number')
    return "hold"


Text: TypeAlias = Annotated[str, AfterValidator(_not_blank)]
Folder: TypeAlias = Annotated[str, AfterValidator(_folder_name)]
PathList: TypeAlias = Annotated[list[str], BeforeValidator(_paths)]
ZoneName: TypeAlias = Annotated[str, AfterValidator(_zone)]
EncodingName: TypeAlias = Annotated[str, AfterValidator(_encoding)]
OneCharacter: TypeAlias = Annotated[str, AfterValidator(_one_character)]
Codes: TypeAlias = Annotated[list[Any], BeforeValidator(_codes)]
Moment: TypeAlias = Annotated[datetime.datetime, BeforeValidator(_moment)]
Duration: TypeAlias = Annotated[float, BeforeValidator(_reader(SECONDS, "a duration", '"60s"'))]
Energy: TypeAlias = Annotated[float, BeforeValidator(_reader(JOULES, "an energy", '"18 mJ"'))]
Power: TypeAlias = Annotated[float, BeforeValidator(_reader(WATTS, "a power", '"60 uW"'))]
IntegralTime: TypeAlias = Annotated[float | Literal["none"], BeforeValidator(_integral_time)]
FailAction: TypeAlias = Annotated[float | Literal["hold"], BeforeValidator(_fail_action)]
