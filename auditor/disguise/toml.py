"""A small writer of TOML: strings, numbers, truth values, lists, inline tables (TOML 1.0)."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import Any

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_ESCAPES = {"\\": "\\\\", '"': '\\"', "\b": "\\b", "\t": "\\t", "\n": "\\n", "\f": "\\f", "\r": "\\r"}


def written(value: Any) -> str:
    """Write one value; a float with as many digits as it needs to come back the same.

    Raises
    ------
    TypeError
        The value has no counterpart in TOML (None, for example).
    """
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return '"' + "".join(_character(c) for c in value) + '"'
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float):
        return repr(float(value))
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{key(k)} = {written(v)}" for k, v in value.items()) + " }"
    if isinstance(value, Sequence):
        return "[" + ", ".join(written(v) for v in value) + "]"
    raise TypeError(f"no TOML for {type(value).__name__}")


def key(name: str) -> str:
    """Write a key, in quotes where it has to be."""
    return name if _BARE.fullmatch(name) else written(name)


def table(head: str, body: Mapping[str, Any]) -> str:
    """Write a table with its head, such as ``[loop]``; keys without a value (None) are left out."""
    return "\n".join([head, *(f"{key(k)} = {written(v)}" for k, v in body.items() if v is not None)])


def _character(c: str) -> str:
    if c in _ESCAPES:
        return _ESCAPES[c]
    # Control characters must be escaped.
    return f"\\u{ord(c):04x}" if ord(c) < 0x20 or ord(c) == 0x7F else c
