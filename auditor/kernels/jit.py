"""The one place that compiles.

Strict IEEE arithmetic everywhere: without fastmath the compiled loop equals a plain Python loop bit for bit, and
the same on every machine. Compiled code is cached on disk, so that only the first run pays for it.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

import numba
from numba import config, types

_F = TypeVar("_F", bound=Callable[..., Any])

_ROWS = types.float64[:, ::1]
RULE_SIGNATURE = types.void(_ROWS, _ROWS, types.int64[::1], _ROWS, _ROWS, types.uint8[::1])
"""``fires(now, sent, since, memory, settings, out)``: every rule has this one signature, so that the replay is
compiled once and calls any rule, also a user's own, through a function pointer."""
RULE_TYPE = types.FunctionType(RULE_SIGNATURE)


def cache_folder() -> Path:
    """Folder of the compiled code: one per state of the sources that are compiled into each other.

    A cached function is checked against its own file only. A change in a function that was compiled into it would
    go unseen, and so would an upgrade of the program; with the sources' hash in the folder's name neither can.
    """
    package = Path(__file__).resolve().parent.parent
    digest = hashlib.sha256()
    for path in sorted((*package.glob("kernels/*.py"), *package.glob("rules/*.py"))):
        digest.update(path.read_bytes())
    stated = os.environ.get("NUMBA_CACHE_DIR") or os.environ.get("XDG_CACHE_HOME")
    root = Path(stated) if stated else Path.home() / ".cache"
    return root / "log-replay-auditor" / digest.hexdigest()[:16]


_FOLDER = str(cache_folder())


def _cached(decorate: Callable[[_F], _F], function: _F) -> _F:
    """Apply a decorator with the cache in our folder, and leave other users of the compiler alone."""
    settings: Any = config
    before = settings.CACHE_DIR
    settings.CACHE_DIR = _FOLDER
    try:
        return decorate(function)
    finally:
        settings.CACHE_DIR = before


def compiled(function: _F) -> _F:
    """Compile a function of floats and arrays; types are found at the first call."""
    return _cached(cast(Callable[[_F], _F], numba.njit(cache=True, nogil=True, error_model="numpy")), function)


def compiled_as(signature: Any) -> Callable[[_F], _F]:
    """Compile a function for one declared signature, at import."""
    decorate = cast(Callable[[_F], _F], numba.njit(signature, cache=True, nogil=True, error_model="numpy"))
    return lambda function: _cached(decorate, function)


def rule(function: _F) -> _F:
    """Compile a rule for `RULE_SIGNATURE`."""
    return compiled_as(RULE_SIGNATURE)(function)
