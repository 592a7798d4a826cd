"""Automatic or not: the mode column, compared as text and, where both sides are numbers, as numbers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from auditor.arrays import BoolArray
from auditor.logs.grid import Grid
from auditor.logs.order import Order
from auditor.logs.runs import latest

_UNKNOWN = 2


def is_automatic(text: object, automatic: Sequence[Any]) -> bool:
    """Tell whether a mode cell is one of the automatic values: "1", "1.0" and 1 are the same mode."""
    return any(_same(str(text).strip(), _plain(value)) for value in automatic)


def _plain(value: object) -> str:
    """Write a value as a log would, a truth value as 1 or 0."""
    return str(int(value)) if isinstance(value, bool) else str(value).strip()


def _same(one: str, other: str) -> bool:
    """Compare two mode values."""
    if one == other:
        return True
    try:
        return float(one) == float(other)
    except ValueError:
        return False


def read_modes(
    cells: npt.NDArray[Any], automatic: Sequence[Any], order: Order, grid: Grid
) -> tuple[BoolArray, Mapping[str, int], tuple[str, ...]]:
    """Return where the loop was not in automatic.

    Parameters
    ----------
    cells : ndarray, shape (rows,)
        The mode column as recorded, as text or numbers; empty cells keep the mode before them.
    automatic : sequence
        The values that mean automatic.
    order, grid : Order, Grid

    Returns
    -------
    manual : ndarray of bool, shape (N,)
        True where the mode is another one, or not known because none was stored yet.
    others : mapping of str to int
        The other values met, with their rows.
    unmet : tuple of str
        The values that mean automatic when none of them occurs, else empty.
    """
    codes, names = pd.factorize(order.arrange(cells), use_na_sentinel=True)
    kinds = [_UNKNOWN if str(name).strip() == "" else int(is_automatic(name, automatic)) for name in names]
    rows = np.array([*kinds, _UNKNOWN], dtype=np.int8)[codes]
    tally = np.bincount(codes[codes >= 0], minlength=len(names))
    others = {str(name): int(tally[i]) for i, name in enumerate(names) if kinds[i] == 0}
    stamps = rows if order.first is None else np.minimum.reduceat(rows, order.first)
    unmet = () if 1 in kinds else tuple(_plain(value) for value in automatic)
    return _not_automatic(stamps, grid), MappingProxyType(others), unmet


def _not_automatic(stamps: npt.NDArray[np.int8], grid: Grid) -> BoolArray:
    """Hold the last known mode along the grid."""
    known = stamps != _UNKNOWN
    mode = np.full(grid.count, _UNKNOWN, dtype=np.int8)
    mode[grid.instant[known]] = stamps[known]
    source = latest(mode != _UNKNOWN)
    held = np.where(source >= 0, mode[source], _UNKNOWN)
    return np.asarray(held != 1)
