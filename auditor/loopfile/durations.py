"""Durations, energies and powers as a loop file writes them: a number and its unit, or a plain number in SI."""

from __future__ import annotations

import re
from collections.abc import Mapping
from types import MappingProxyType

SECONDS: Mapping[str, float] = MappingProxyType(
    {"us": 1e-6, "µs": 1e-6, "ms": 1e-3, "s": 1.0, "min": 60.0, "h": 3600.0, "d": 86400.0}
)
JOULES: Mapping[str, float] = MappingProxyType(
    {"uJ": 1e-6, "µJ": 1e-6, "mJ": 1e-3, "J": 1.0, "kJ": 1e3, "MJ": 1e6, "mWh": 3.6, "Wh": 3600.0, "kWh": 3.6e6}
)
WATTS: Mapping[str, float] = MappingProxyType({"nW": 1e-9, "uW": 1e-6, "µW": 1e-6, "mW": 1e-3, "W": 1.0})

_QUANTITY = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*([A-Za-zµμ]*)\s*")


def quantity(value: object, units: Mapping[str, float]) -> float:
    """Return `value` in the SI unit of `units`.

    Parameters
    ----------
    value : object
        A number (taken as SI) or text such as ``"15min"``, ``"0.2 mJ"``.
    units : mapping of str to float
        Size of each unit that may be written.

    Raises
    ------
    ValueError
        When `value` is neither a number nor a number followed by one of `units`.
    """
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        return float(value)
    match = _QUANTITY.fullmatch(value) if isinstance(value, str) else None
    unit = match[2].replace("μ", "µ") if match else ""
    if match is None or unit not in units:
        raise ValueError(f"not a number with one of the units {', '.join(units)}")
    return _scaled(float(match[1]), units[unit])


def seconds(value: object) -> float:
    """Return a duration, such as ``"250ms"``, ``"60s"``, ``"15min"``, ``"2h"``, ``"1d"`` or a number, in seconds.

    Raises
    ------
    ValueError
        When `value` is neither a number nor a number with a unit of time.
    """
    return quantity(value, SECONDS)


def is_duration(value: object) -> bool:
    """Return True for text that reads as a duration (a plain number is not text)."""
    match = _QUANTITY.fullmatch(value) if isinstance(value, str) else None
    return match is not None and match[2].replace("μ", "µ") in SECONDS


def _scaled(count: float, size: float) -> float:
    # Dividing by the whole number keeps "250ms" exactly 0.25, which multiplying by 1e-3 does not always do.
    return count / round(1.0 / size) if size < 1.0 else count * size
