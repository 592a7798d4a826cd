"""Which column tells the time, on what clock, and how far apart the rows are."""

from __future__ import annotations

import re
import zoneinfo
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.draft import stamps
from auditor.draft.columns import Column
from auditor.draft.guess import CHECK, LIKELY, SURE
from auditor.draft.words import names, tokens

HOUR = 3600.0
_ZONE_NAME = re.compile(r"\b[A-Z][A-Za-z]+/[A-Z][A-Za-z_]+(?:/[A-Z][A-Za-z_]+)?\b")
_CENTRAL = frozenset({"cet", "cest", "mez", "mesz", "met", "mest"})


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Clock:
    """The column that tells the time.

    Attributes
    ----------
    column : str
    ns : ndarray of int64, shape (rows,)
        Times [ns since 1970, as if UTC where the clock's zone is not written]; `stamps.NO_TIME` where unreadable.
    unit, way : str or None
        Unit of epoch numbers; the way of writing where it is not ISO 8601.
    absolute : bool
        True when the stamps need no time zone: epochs, or offsets are written.
    other_way : str or None
        A second way of writing that fits all the same (day and month may be exchanged).
    elapsed : bool
        True when the numbers count from the start of the log.
    reason, sure : str
    """

    column: str
    ns: IntArray
    unit: str | None = None
    way: str | None = None
    absolute: bool = False
    other_way: str | None = None
    elapsed: bool = False
    reason: str = ""
    sure: str = SURE


@dataclass(frozen=True, slots=True)
class Order:
    """How well times behave: shares of rows with a time, in order, and as far apart as the median gap [s]."""

    read: float
    forward: float
    regular: float
    gap: float


def order_of(ns: IntArray, starts: BoolArray) -> Order:
    """Judge the times of a column; nothing is compared over the border between two parts."""
    known = ns != stamps.NO_TIME
    gaps = gaps_of(ns, starts)
    forward = gaps[gaps > 0]
    if not len(forward):
        return Order(float(np.mean(known)), 0.0, 0.0, 0.0)
    middle = float(np.median(forward))
    regular = float(np.mean(np.abs(forward - middle) <= 0.02 * middle))
    return Order(float(np.mean(known)), float(np.mean(gaps >= 0)), regular, middle)


def gaps_of(ns: IntArray, starts: BoolArray) -> FloatArray:
    """Return the gaps between neighbouring rows that have a time [s], turned round when the newest row is first."""
    known = ns != stamps.NO_TIME
    both = known[1:] & known[:-1] & ~starts[1:]
    gaps = np.asarray((ns[1:] - np.where(known[:-1], ns[:-1], 0))[both] / 1e9)
    return -gaps if 2 * np.count_nonzero(gaps < 0) > len(gaps) else gaps


def is_newest_first(ns: IntArray) -> bool:
    """Return True where most times are earlier than the one in the row above; `stamps.NO_TIME` is left out."""
    steps = np.diff(ns[ns != stamps.NO_TIME])
    return 2 * int(np.count_nonzero(steps < 0)) > len(steps)


def find_clock(columns: Sequence[Column], starts: BoolArray) -> Clock | None:
    """Return the column that most likely tells the time, None when there is none.

    Parameters
    ----------
    columns : sequence of Column
    starts : ndarray of bool, shape (rows,)
        True at the first row of each part.
    """
    read = [clock for n, column in enumerate(columns) for clock in _readings(column, n == 0, starts)]
    read += _two_columns(columns, starts)
    found = [(clock, order_of(clock.ns, starts)) for clock in read]
    usable = [(clock, order) for clock, order in found if order.read > 0.8 and order.forward > 0.9]
    if not usable:
        return None
    clock, order = max(usable, key=lambda pair: _worth(*pair))
    return _with_reason(clock, order)


def _worth(clock: Clock, order: Order) -> float:
    named = names(clock.column, "time") is not None
    counted = 1.0 if clock.elapsed else 0.2 if clock.unit else 0.0
    utc = 0.05 if clock.absolute and clock.unit is None else 0.0
    return order.read + order.forward + 0.3 * order.regular + 0.2 * named - counted + utc


def _readings(column: Column, first: bool, starts: BoolArray) -> Iterator[Clock]:
    if pa.types.is_timestamp(column.cells.type):
        yield Clock(column=column.name, ns=stamps.from_arrow(column.cells), absolute=column.cells.type.tz is not None)
    elif column.filled > 0.5:
        samples = stamps.samples_of(column.cells)
        text = _text_clock(column, samples, starts)
        if text is not None:
            yield text
        elif column.is_number and not column.constant:
            yield from _number_clock(column, first, starts)


def _text_clock(column: Column, samples: Sequence[str], starts: BoolArray) -> Clock | None:
    ways = stamps.formats_for(samples)
    if not ways:
        return None
    read = {way: stamps.parse(column.cells, way) for way in ways}
    # Exchanging day and month makes the stamps jump by months at midnight, so that the right order is the steadier one.
    scored = sorted(ways, key=lambda way: _steadiness(read[way], starts), reverse=True)
    best = scored[0]
    tied = [w for w in scored[1:] if _steadiness(read[w], starts) == _steadiness(read[best], starts)]
    return Clock(
        column=column.name,
        ns=read[best],
        way=None if best == stamps.ISO else best,
        absolute=stamps.has_offset(samples),
        other_way=tied[0] if tied else None,
    )


def _two_columns(columns: Sequence[Column], starts: BoolArray) -> list[Clock]:
    """Join a column of dates and one of times of day; the loop file writes ``date + clock``."""
    texts = [(column, stamps.samples_of(column.cells)) for column in columns if pa.types.is_string(column.cells.type)]
    dates = [column for column, samples in texts if stamps.is_date_only(samples)]
    hours = [column for column, samples in texts if stamps.is_time_only(samples)]
    if not dates or not hours:
        return []
    joined = pc.binary_join_element_wise(
        pc.utf8_trim_whitespace(dates[0].cells), pc.utf8_trim_whitespace(hours[0].cells), " "
    )
    both = replace(dates[0], name=f"{dates[0].name} + {hours[0].name}", cells=joined)
    clock = _text_clock(both, stamps.samples_of(joined), starts)
    return [clock] if clock else []


def _steadiness(ns: IntArray, starts: BoolArray) -> tuple[float, float, float]:
    order = order_of(ns, starts)
    return round(order.read, 3), round(order.forward, 5), round(order.regular, 5)


def _number_clock(column: Column, first: bool, starts: BoolArray) -> Iterator[Clock]:
    unit = stamps.epoch_unit(column.numbers)
    named = names(column.name, "time") is not None
    if unit is not None:
        ns = stamps.from_numbers(column.numbers, unit)
        if named or order_of(ns, starts).regular > 0.5:
            yield Clock(column=column.name, ns=ns, unit=unit, absolute=True)
    elif named or first or names(column.name, "index") is not None:
        ends = {"ms": "ms", "millis": "ms", "us": "us"}
        unit = next((ends[token] for token in tokens(column.name) if token in ends), "s")
        ns = stamps.from_numbers(column.numbers, unit)
        if order_of(ns, starts).regular > 0.9:
            yield Clock(column=column.name, ns=ns, unit=unit, absolute=True, elapsed=True)


def _with_reason(clock: Clock, order: Order) -> Clock:
    named = names(clock.column, "time")
    parts = [f"{100 * order.read:.1f} % of the rows have a time there, {100 * order.forward:.2f} % of them in order"]
    sure = SURE if order.read > 0.99 and order.forward > 0.99 else LIKELY
    if named:
        parts.append(f'the name says "{named}"')
    if clock.elapsed:
        parts.append("it counts from the start of the log and is taken as seconds since 1970")
        sure = CHECK
    elif clock.unit:
        sure = SURE if named and order.regular > 0.5 else LIKELY
        parts.append(f"the numbers are plausible as {clock.unit} since 1970")
    if clock.other_way:
        parts.append(f"{clock.other_way} would fit as well")
        sure = CHECK
    return replace(clock, reason="; ".join(parts), sure=sure)


@dataclass(frozen=True, slots=True)
class Zone:
    """The zone of a local clock; `name` is empty when only a person can tell."""

    name: str
    reason: str
    sure: str


def zone_of(clock: Clock, before: str, starts: BoolArray) -> Zone | None:
    """Return the zone to state, None when the stamps need none.

    Parameters
    ----------
    clock : Clock
    before : str
        Header and the text before it.
    starts : ndarray of bool, shape (rows,)
    """
    if clock.absolute:
        return None
    named = next((name for name in _ZONE_NAME.findall(before) if _is_zone(name)), None)
    if named:
        return Zone(named, "the text before the rows names it", SURE)
    words = set(tokens(before))
    if words & {"utc", "gmt"}:
        return Zone("UTC", "the header or the text before it says so", SURE)
    if words & _CENTRAL:
        said = ", ".join(sorted(words & _CENTRAL)).upper()
        return Zone("", f'the log says {said}: state the place, such as "Europe/Amsterdam", or "Etc/GMT-1"', CHECK)
    turn = _summer_time(clock.ns, starts)
    if turn:
        return Zone("", f"the clock {turn}, as a local clock with summer time does: state its place", CHECK)
    reason = "the stamps carry no offset and nothing tells their zone: state it if the clock is a local one"
    return Zone("UTC", reason, CHECK)


def _is_zone(name: str) -> bool:
    try:
        zoneinfo.ZoneInfo(name)
    except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError):
        return False
    return True


def _summer_time(ns: IntArray, starts: BoolArray) -> str:
    """Return how the clock turns at the change of summer time, empty when it does not."""
    gaps = gaps_of(ns, starts)
    if not (gaps > 0).any():
        return ""
    step = float(np.median(gaps[gaps > 0]))
    if (np.abs(gaps + HOUR - step) < 0.5 * step + 1.0)[gaps < 0].any():
        return "goes back one hour in the log"
    return "leaves out one hour on a Sunday night" if _skips_an_hour(ns, starts, step) else ""


def _skips_an_hour(ns: IntArray, starts: BoolArray, step: float) -> bool:
    known = ns != stamps.NO_TIME
    after = np.flatnonzero(known[1:] & known[:-1] & ~starts[1:]) + 1
    late = after[np.abs(gaps_of(ns, starts) - HOUR - step) < 0.5 * min(step, HOUR) + 1.0]
    # 1 January 1970 was a Thursday, so that day 3 is a Sunday.
    days, hours = ns[late] // (24 * 3600 * 10**9), ns[late] // (3600 * 10**9) % 24
    return bool(((days % 7 == 3) & (hours >= 2) & (hours <= 3)).any()) and step < HOUR


def period_text(seconds: float) -> str:
    """Write a period as the loop file takes it, rounded to what a clock would be set to."""
    if seconds < 1.0:
        return f"{float(f'{1000 * seconds:.3g}'):g}ms"
    near = round(seconds)
    seconds = near if abs(near - seconds) <= 0.02 * seconds else float(f"{seconds:.3g}")
    for size, unit in ((86400, "d"), (3600, "h"), (60, "min")):
        if seconds > 120 and seconds % size == 0:
            return f"{seconds // size:g}{unit}"
    return f"{seconds:g}s"
