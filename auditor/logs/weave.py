"""Signals with stamps of their own woven into one log: rows are the stamps of all of them, NaN where one has none."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.cells import TextArray
from auditor.logs.runs import latest


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Strand:
    """Columns with one time axis, in recorded order; `own` is empty where every column has all rows.

    `mode` names the text column in which an empty cell is "" and not None.
    """

    time: IntArray
    channels: Mapping[str, FloatArray]
    texts: Mapping[str, TextArray]
    own: Mapping[str, BoolArray]
    mode: str | None = None


def woven(strands: Sequence[Strand], leading: str | None) -> Strand:
    """Weave strands into one.

    A stamp that a strand has twice has two rows, so that repeated rows can still be told from rows of two strands.
    Rows are in order of time, or follow the `leading` column's where that was recorded in another order.

    Parameters
    ----------
    strands : sequence of Strand
    leading : str or None
        The column whose recorded order is kept: the measurement.
    """
    if len(strands) == 1:
        return strands[0]
    time, places = _rows([strand.time for strand in strands])
    order = _recorded_order(len(time), [p for s, p in zip(strands, places, strict=True) if leading in s.channels])
    if order is not None:
        rank = np.empty(len(order), dtype=np.int64)
        rank[order] = np.arange(len(order))
        time, places = time[order], [rank[place] for place in places]
    channels: dict[str, FloatArray] = {}
    texts: dict[str, TextArray] = {}
    own: dict[str, BoolArray] = {}
    for strand, place in zip(strands, places, strict=True):
        mine = _spread(np.ones(len(place), dtype=np.bool_), place, np.zeros(len(time), dtype=np.bool_))
        own |= dict.fromkeys([*strand.channels, *strand.texts], mine)
        for name, values in strand.channels.items():
            channels[name] = _spread(values, place, np.full(len(time), np.nan))
        for name, words in strand.texts.items():
            empty = "" if name == strand.mode else None
            texts[name] = _spread(words, place, np.full(len(time), empty, dtype=object))
    return Strand(time=time, channels=channels, texts=texts, own=own)


def _spread(values: npt.NDArray[Any], place: IntArray, rows: npt.NDArray[Any]) -> npt.NDArray[Any]:
    rows[place] = values
    return rows


def _rows(times: Sequence[IntArray]) -> tuple[IntArray, list[IntArray]]:
    """Return the rows of all strands in order of time, and each strand's places among them."""
    merged = np.sort(np.concatenate(times), kind="stable")
    fresh = np.ones(len(merged), dtype=np.bool_)
    fresh[1:] = merged[1:] != merged[:-1]
    stamps = merged[fresh]
    where = [np.searchsorted(stamps, time) for time in times]
    again = [_occurrence(time) for time in times]
    if not any(count.any() for count in again):
        return stamps, where
    most = np.ones(len(stamps), dtype=np.int64)
    for place, count in zip(where, again, strict=True):
        np.maximum.at(most, place, count + 1)
    first = np.cumsum(most) - most
    return np.repeat(stamps, most), [first[place] + count for place, count in zip(where, again, strict=True)]


def _occurrence(time: IntArray) -> IntArray:
    """Return, for every row, how many rows before it have the same stamp."""
    if bool((time[1:] > time[:-1]).all()):
        return np.zeros(len(time), dtype=np.int64)
    order = np.argsort(time, kind="stable")
    fresh = np.ones(len(time), dtype=np.bool_)
    fresh[1:] = time[order][1:] != time[order][:-1]
    count = np.empty(len(time), dtype=np.int64)
    count[order] = np.arange(len(time)) - latest(fresh)
    return count


def _recorded_order(rows: int, leading: Sequence[IntArray]) -> IntArray | None:
    """Return the rows in the order in which the leading strand was recorded, None where that is the order of time.

    Rows between two stamps of the leading strand stay behind the earlier one.
    """
    if not leading or bool((np.diff(leading[0]) > 0).all()):
        return None
    rank = np.full(rows, -1, dtype=np.int64)
    rank[leading[0]] = np.arange(len(leading[0]))
    source = latest(rank >= 0)
    return np.argsort(np.where(source >= 0, rank[source], -1), kind="stable")
