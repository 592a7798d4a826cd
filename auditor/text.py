"""Words and numbers as people read them; shared by errors, reasons and pages."""

from __future__ import annotations

import difflib
import math
from collections.abc import Iterable


def nearest(word: str, known: Iterable[str], cutoff: float = 0.5) -> str | None:
    """Return the known word closest to `word`, or None when nothing is close; `cutoff` 1 asks for the word itself."""
    close = difflib.get_close_matches(word, list(known), n=1, cutoff=cutoff)
    return close[0] if close else None


def nearest_file(name: str, known: Iterable[str]) -> str | None:
    """Return the known file name closest to `name`, or None when nothing is close.

    Endings are left out of the comparison: they would make every short name alike.
    """
    stems = {_stem(other): other for other in sorted(known, reverse=True)}
    close = nearest(_stem(name), stems, cutoff=0.6)
    return None if close is None else stems[close]


def _stem(name: str) -> str:
    bare = name.casefold().removesuffix(".gz").removesuffix(".zst")
    return bare.rpartition(".")[0] or bare


FILL_IN = "# FILL IN"
"""Mark of a line of a drafted loop file that waits for a person."""

TIME_UNITS = ((86400.0, "d"), (3600.0, "h"), (60.0, "min"), (1.0, "s"), (1e-3, "ms"))
"""Units of time from the largest down, each with its size [s]."""


def duration(seconds: float) -> str:
    """Write a duration the way a loop file takes it, in the largest unit that reads well."""
    for size, unit in TIME_UNITS:
        if abs(seconds) >= size:
            return f"{seconds / size:.3g} {unit}"
    return "0 s" if seconds == 0 else f"{seconds:.3g} s"


def number(value: float | None, digits: int = 3) -> str:
    """Write a number with `digits` significant digits, without an exponent where that can be read."""
    if value is None or not math.isfinite(value):
        return "–"
    if value != 0 and (abs(value) >= 1e7 or abs(value) < 1e-4):
        return f"{value:.{digits - 1}e}"
    decimals = max(0, digits - 1 - (math.floor(math.log10(abs(value))) if value else 0))
    return f"{value:,.{decimals}f}".replace(",", "\u202f")


def quantity(value: float, unit: str, digits: int = 2) -> str:
    """Write a number with its unit."""
    return f"{number(value, digits)} {unit}".rstrip()


def percent(fraction: float | None, digits: int = 0) -> str:
    """Write a fraction as a percentage."""
    if fraction is None or not math.isfinite(fraction):
        return "–"
    return f"{100 * fraction:.{digits}f} %"
