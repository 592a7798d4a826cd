"""The ways a time stamp can be written, as patterns over bytes; the named groups are the fields of a stamp.

Groups: Y y (year), m b (month, its name), d, A B (two numbers of which one is the day), H I p (hour, twelve-hour
clock), M, S, f (fraction), zulu sign zh zm (offset).
"""

from __future__ import annotations

import re

from auditor.errors import LogError, Problem

MONTHS = (
    "january",
    "february",
    "march",
    "april",
    "may",
    "june",
    "july",
    "august",
    "september",
    "october",
    "november",
    "december",
)
_MONTH_NAMES = "|".join([*MONTHS, *(name[:3] for name in MONTHS)])

_ZONE = r"(?:(?P<zulu>[Zz]|UTC|GMT)|(?P<sign>[+-])(?P<zh>\d{2})(?::?(?P<zm>\d{2}))?)"
_HALF = r"(?P<p>[AaPp]\.?[Mm]\.?)"
_SECONDS = r"(?::(?P<S>\d{2})(?:[.,](?P<f>\d+))?)?"
_CLOCK = rf"(?P<H>\d{{1,2}}):(?P<M>\d{{2}}){_SECONDS}(?: ?{_HALF})?"
_REST = rf"(?:(?:[Tt ]|, ?)\s*{_CLOCK})?\s?{_ZONE}?"
_NAME = rf"(?P<b>(?i:{_MONTH_NAMES}))\.?"


def _pattern(text: str) -> re.Pattern[bytes]:
    return re.compile(rf"\s*{text}\s*".encode())


# RFC 3339 §5.6 and what ISO 8601 allows beside it without a doubt: a comma, no seconds, no colons, a date alone.
YEAR_FIRST = _pattern(rf"(?P<Y>\d{{4}})(?P<sep>[-/.])(?P<m>\d{{1,2}})(?P=sep)(?P<d>\d{{1,2}}){_REST}")
COMPACT = _pattern(
    rf"(?P<Y>\d{{4}})(?P<m>\d{{2}})(?P<d>\d{{2}})[Tt](?P<H>\d{{2}})(?P<M>\d{{2}})"
    rf"(?:(?P<S>\d{{2}})(?:[.,](?P<f>\d+))?)?{_ZONE}?"
)
# Dates with points are written day first wherever points are used.
POINTS = _pattern(rf"(?P<d>\d{{1,2}})\.(?P<m>\d{{1,2}})\.(?P<Y>\d{{4}}){_REST}")
NAMED = _pattern(rf"(?P<d>\d{{1,2}})(?P<sep>[- /.]){_NAME}(?P=sep)(?P<Y>\d{{4}}){_REST}")
UNSETTLED = _pattern(rf"(?P<A>\d{{1,2}})(?P<sep>[-/])(?P<B>\d{{1,2}})(?P=sep)(?P<Y>\d{{4}}){_REST}")
FOUND_BY_LOOKING = (YEAR_FIRST, UNSETTLED, POINTS, NAMED, COMPACT)

_SHORT_YEAR = _pattern(rf"(?P<A>\d{{1,2}})(?P<sep>[-/.])(?P<B>\d{{1,2}})(?P=sep)(?P<y>\d{{2}}){_REST}")
_SHORT_NAMED = _pattern(rf"(?P<d>\d{{1,2}})(?P<sep>[- /.]){_NAME}(?P=sep)(?P<y>\d{{2}}){_REST}")

_DIRECTIVES = {
    "Y": r"(?P<Y>\d{4})",
    "y": r"(?P<y>\d{2})",
    "m": r"(?P<m>\d{1,2})",
    "b": _NAME,
    "B": _NAME,
    "d": r"(?P<d>\d{1,2})",
    "H": r"(?P<H>\d{1,2})",
    "I": r"(?P<I>\d{1,2})",
    "p": _HALF,
    "M": r"(?P<M>\d{1,2})",
    "S": r"(?P<S>\d{1,2})",
    "f": r"(?P<f>\d{1,9})",
    "z": _ZONE,
    "%": "%",
}
_SHORTHANDS = {"%T": "%H:%M:%S", "%F": "%Y-%m-%d", "%R": "%H:%M", "%D": "%m/%d/%y", "%-": "%", "%#": "%"}


def from_format(time_format: str) -> re.Pattern[bytes]:
    """Turn a `time_format` with the usual percent directives into a pattern.

    Raises
    ------
    LogError
        When a directive is unknown or stands twice, or when year, month or day is missing.
    """
    spelled = time_format
    for short, long in _SHORTHANDS.items():
        spelled = spelled.replace(short, long)
    parts = re.split(r"%(.)", spelled, flags=re.DOTALL)
    directives = parts[1::2]
    fault = _fault(directives)
    if fault:
        example = 'time_format = "%d.%m.%Y %H:%M:%S"'
        expected = "each once: " + " ".join(f"%{letter}" for letter in _DIRECTIVES if letter != "%")
        do = f"write it like {example}"
        raise LogError(
            Problem(what=fault, where="[log] time_format", found=f'"{time_format}"', expected=expected, do=do)
        )
    pieces = [re.escape(part) if k % 2 == 0 else _DIRECTIVES[part] for k, part in enumerate(parts)]
    return re.compile(rf"\s*{''.join(pieces)}\s*".encode())


def _fault(directives: list[str]) -> str:
    unknown = [letter for letter in directives if letter not in _DIRECTIVES]
    if unknown:
        return f"time_format has a directive that is not known: %{unknown[0]}."
    letters = "".join("b" if letter == "B" else letter for letter in directives if letter != "%")
    if len(set(letters)) < len(letters):
        return "time_format has a directive twice."
    missing = [
        name for name, any_of in (("year", "Yy"), ("month", "mb"), ("day", "d")) if not set(any_of) & set(letters)
    ]
    if missing:
        return f"time_format lacks the {' and the '.join(missing)}."
    return "time_format has %I without %p, or %p without %I." if ("I" in letters) != ("p" in letters) else ""


def formats_for(stamp: str) -> tuple[str, ...]:
    """List the `time_format`s that a stamp which cannot be settled by looking may be meant in."""
    text = stamp.encode()
    for pattern, orders in ((UNSETTLED, ("dm", "md")), (_SHORT_YEAR, ("dmy", "mdy", "ymd")), (_SHORT_NAMED, ("dby",))):
        match = pattern.fullmatch(text)
        if match is not None:
            return tuple(_as_format(match, order) for order in orders)
    return ()


def _as_format(match: re.Match[bytes], order: str) -> str:
    """Write a matched stamp as a format, its first numbers read in the given order."""
    text, fields = match.string.decode(), match.groupdict()
    first_fields = ("A", "B", "y") if fields.get("A") else ("d", "b", "y")
    letters = dict(zip(first_fields, order, strict=False)) | {name: name for name in "YMSfp"}
    letters |= {"H": "I" if fields.get("p") else "H"}
    spans = [(match.span(name), letters[name]) for name in letters if fields.get(name) is not None]
    zone = next((name for name in ("zulu", "sign") if fields.get(name) is not None), None)
    if zone:
        spans.append(((match.start(zone), max(match.end(name) for name in (zone, "zh", "zm"))), "z"))
    for (start, end), letter in sorted(spans, reverse=True):
        text = f"{text[:start]}%{letter}{text[end:]}"
    return text.strip()
