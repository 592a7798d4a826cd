"""Everything found by looking at a log: clock, layout, mode, roles, and the signals' own ranges."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, FloatArray
from auditor.draft.clock import Clock, Order, Zone, find_clock, is_newest_first, order_of, zone_of
from auditor.draft.columns import Column, columns_of, part_starts
from auditor.draft.extent import Extent, extent_of
from auditor.draft.grid import even
from auditor.draft.layout import Long, find_long
from auditor.draft.peek import Peek, look
from auditor.draft.roles import Roles, find_roles, strongest
from auditor.draft.whole import whole_columns
from auditor.draft.words import AUTOMATIC, names, plain


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class ModeFound:
    """The column that tells automatic operation, and which of its states do."""

    column: str
    states: tuple[str, ...]
    automatic: tuple[str, ...]
    by_word: bool


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Survey:
    """What was found.

    Attributes
    ----------
    peek : Peek
    columns : tuple of Column
        The log's own columns.
    clock, order, zone : Clock, Order, Zone or None
        None when no column tells the time (zone: also when the stamps need none).
    long : Long or None
    mode : ModeFound or None
    candidates : tuple of Column
        The signals among which the roles were looked for.
    grid : ndarray, shape (N, m)
        The candidates on an even clock, in automatic operation where a mode is known.
    roles : Roles or None
    extent : Extent or None
        The rows that tell how far the signals went; None without roles.
    """

    peek: Peek
    columns: tuple[Column, ...]
    clock: Clock | None
    order: Order | None
    zone: Zone | None
    long: Long | None
    mode: ModeFound | None
    candidates: tuple[Column, ...]
    grid: FloatArray
    roles: Roles | None
    extent: Extent | None

    def written(self, name: str) -> str | None:
        """Return the name by which the log knows a column, empty where it has none, None where two have the same."""
        if self.long is not None and name in (column.name for column in self.long.columns):
            return name
        if name not in self.peek.names:
            return name
        own = self.peek.written[self.peek.names.index(name)]
        return None if own and self.peek.written.count(own) > 1 else own


def survey(path: Path) -> Survey:
    """Look at a log.

    Raises
    ------
    LogError
        When the log cannot be opened as a table.
    """
    peek = look(path)
    columns, starts = columns_of(peek), part_starts(peek)
    clock = find_clock(columns, starts)
    long = find_long(columns, clock.column) if clock else None
    order = _order(clock, long, starts)
    signals = long.columns if long else tuple(c for c in columns if clock is None or c.name != clock.column)
    mode = find_mode(signals)
    candidates = _candidates(signals, mode)
    grid, use = _grid(candidates, mode, signals, clock, order, starts)
    roles = find_roles([c.name for c in candidates], grid, use) if len(candidates) > 1 else None
    return Survey(
        peek=peek,
        columns=columns,
        clock=clock,
        order=order,
        zone=zone_of(clock, _said(peek), starts) if clock else None,
        long=long,
        mode=mode,
        candidates=candidates,
        grid=grid,
        roles=roles,
        extent=_extent(path, peek, clock, long, mode, signals, candidates, roles),
    )


def _extent(
    path: Path,
    peek: Peek,
    clock: Clock | None,
    long: Long | None,
    mode: ModeFound | None,
    signals: Sequence[Column],
    candidates: Sequence[Column],
    roles: Roles | None,
) -> Extent | None:
    """Take the three signals and the mode from the whole log where that is possible, else from what was looked at."""
    if roles is None:
        return None
    names = [candidates[n].name for n in (roles.measurement, roles.actuator)]
    setpoint = None if roles.setpoint is None else candidates[roles.setpoint].name
    others = [name for name in (setpoint, mode.column if mode else None) if name is not None]
    everything = whole_columns(path, peek, [*names, *others], long)
    columns = {column.name: column for column in (signals if everything is None else everything)}
    return extent_of(
        measurement=columns[names[0]].numbers,
        actuator=columns[names[1]].numbers,
        setpoint=columns[setpoint].numbers if setpoint else None,
        automatic=_automatic(mode, list(columns.values())) if mode else None,
        newest_first=clock is not None and is_newest_first(clock.ns),
        whole=peek.whole or everything is not None,
    )


def _said(peek: Peek) -> str:
    return f"{peek.dress.before if peek.dress else ''}\n{' '.join(peek.names)}"


def _order(clock: Clock | None, long: Long | None, starts: BoolArray) -> Order | None:
    """Judge the spacing; in a long log the rows of each tag by themselves."""
    if clock is None:
        return None
    if long is None:
        return order_of(clock.ns, starts)
    per_tag = []
    for column in long.columns:
        mine = np.array(column.cells.is_valid().to_numpy(), dtype=np.bool_)
        parts = np.cumsum(starts)[mine]
        per_tag.append(order_of(clock.ns[mine], np.concatenate([[True], parts[1:] != parts[:-1]])))
    return min((order for order in per_tag if order.gap > 0), key=lambda order: order.gap, default=None)


def find_mode(columns: Sequence[Column]) -> ModeFound | None:
    """Return the column of operating modes: its states say so, or its name does; None when there is none."""
    found = []
    for column in columns:
        states = column.states()
        named = names(column.name, "mode") is not None
        words = tuple(state for state in states if plain(state) in AUTOMATIC)
        if words and (named or not column.is_number):
            found.append(ModeFound(column=column.name, states=tuple(states), automatic=words, by_word=True))
        elif named and states and (not column.is_number or len(states) <= 4):
            likely = _likely_automatic(states)
            found.append(ModeFound(column=column.name, states=tuple(states), automatic=(likely,), by_word=False))
    return max(found, key=lambda mode: mode.by_word, default=None)


def _likely_automatic(states: Sequence[str]) -> str:
    """One of 0 and 1 is most often the 1; else the state the loop is in most of the time."""
    ones = [state for state in states if state in ("1", "1.0", "True", "true")]
    return ones[0] if ones and len(states) <= 2 else states[0]


def _candidates(columns: Sequence[Column], mode: ModeFound | None) -> tuple[Column, ...]:
    usable = [
        column
        for column in columns
        if column.is_number
        and not (mode and column.name == mode.column)
        and names(column.name, "quality") is None
        and not _counts_rows(column)
    ]
    chosen = strongest([c.name for c in usable], [c.filled for c in usable])
    return tuple(usable[n] for n in chosen)


def _counts_rows(column: Column) -> bool:
    """A column that goes up by the same amount in every row is a counter, not a signal."""
    steps = np.diff(column.numbers)
    steps = steps[np.isfinite(steps)]
    return bool(len(steps) > 2 and steps[0] > 0 and np.mean(steps == steps[0]) > 0.99)


def _grid(
    candidates: Sequence[Column],
    mode: ModeFound | None,
    signals: Sequence[Column],
    clock: Clock | None,
    order: Order | None,
    starts: BoolArray,
) -> tuple[FloatArray, BoolArray]:
    """Return the candidates on an even clock, and where the loop was in automatic operation there."""
    rows = len(starts)
    ns, period = (clock.ns, order.gap) if clock and order and order.gap > 0 else (np.arange(rows) * 10**9, 1.0)
    extra = [_automatic(mode, signals)] if mode else [np.ones(rows)]
    stacked = np.column_stack([*(column.numbers for column in candidates), *extra])
    grid = even(np.asarray(ns, dtype=np.int64), stacked, starts, period)
    return grid[:, :-1], grid[:, -1] == 1.0


def _automatic(mode: ModeFound, signals: Sequence[Column]) -> FloatArray:
    """Return 1 in automatic operation, 0 otherwise, NaN where the cell is empty; shape (rows,)."""
    column = next(signal for signal in signals if signal.name == mode.column)
    coded = pc.dictionary_encode(pa.chunked_array([pa.concat_arrays(column.cells.chunks)]))
    words, codes = coded.chunk(0).dictionary.to_pylist(), coded.chunk(0).indices
    means = np.array([*(float(str(word) in mode.automatic) for word in words), np.nan])
    return np.asarray(means[np.asarray(codes.fill_null(len(words)).to_numpy(zero_copy_only=False))])
