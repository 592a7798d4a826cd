"""The one place that compiles.

Strict IEEE arithmetic everywhere: without fastmath the compiled loop equals a plain Python loop bit for bit, and
the same on every machine. Compiled code is cached on disk, so that only the first run pays for it.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba
from numba import types

_F = TypeVar("_F", bound=Callable[..., Any])

_ROWS = types.float64[:, ::1]
RULE_SIGNATURE = types.void(_ROWS, _ROWS, types.int64[::1], _ROWS, _ROWS, types.uint8[::1])
"""``fires(now, sent, since, memory, settings, out)``: every rule has this one signature, so that the replay is
compiled once and calls any rule, also a user's own, through a function pointer."""
RULE_TYPE = types.FunctionType(RULE_SIGNATURE)


def compiled(function: _F) -> _F:
    """Compile a function of floats and arrays; types are found at the first call."""
    return cast(_F, numba.njit(cache=True, nogil=True, error_model="numpy")(function))


def compiled_as(signature: Any) -> Callable[[_F], _F]:
    """Compile a function for one declared signature, at import."""
    return cast(Callable[[_F], _F], numba.njit(signature, cache=True, nogil=True, error_model="numpy"))


def rule(function: _F) -> _F:
    """Compile a rule for `RULE_SIGNATURE`."""
    return compiled_as(RULE_SIGNATURE)(function)
