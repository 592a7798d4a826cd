"""Drawing a key: by how much time is shifted, and by which powers of two values are scaled."""

from __future__ import annotations

import math
from collections.abc import Iterable
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import numpy as np

from auditor.arrays import FloatArray
from auditor.disguise.key import Key
from auditor.logs.log import Log
from auditor.logs.record import Record
from auditor.loop import Loop

NEAREST, FURTHEST = 2, 9
"""Sizes of the exponents drawn: factors of 4 to 512, up or down."""

FIRST_DAY, LAST_DAY = 11_323, 16_801
"""The copy begins between 2001-01-01 and 2016-01-01 [days since 1970]."""

_DAY = 86_400_000_000_000
_GRAIN = 30  # bits kept of an offset: far above twice the last bit of the values it is added to
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def draw_key(loop: Loop, log: Log, record: Record, rng: np.random.Generator, *, offset: bool) -> Key:
    """Draw a key for a loop; the offset of the measurement is zero unless `offset` is True and it is exact."""
    a, b = _exponent(rng), _exponent(rng)
    others = tuple(_exponent(rng) for _ in loop.signals.disturbances)
    shift = time_shift(record.start, log.zone, rng)
    return Key(
        loop=loop.name,
        zone=log.zone,
        columns=neutral_columns(loop),
        units={"measurement": loop.signals.measurement.unit, "actuator": loop.signals.actuator.unit},
        time_shift_ns=shift,
        measurement_exponent=a,
        measurement_offset=exact_offset(loop, record, a, rng) if offset else 0.0,
        actuator_exponent=b,
        disturbance_exponents=others,
    )


def neutral_columns(loop: Loop) -> dict[str, str]:
    """The columns of a loop's log by their neutral names."""
    signals = loop.signals
    named = {"measurement": signals.measurement, "setpoint": signals.setpoint, "actuator": signals.actuator}
    named |= {f"disturbance_{n}": signal for n, signal in enumerate(signals.disturbances, start=1)}
    columns = {"time": loop.log.time}
    columns |= {name: signal.column for name, signal in named.items() if signal.column is not None}
    return columns if signals.mode is None else {**columns, "mode": signals.mode.column}


def _exponent(rng: np.random.Generator) -> int:
    return int(rng.integers(NEAREST, FURTHEST + 1)) * int(rng.choice((-1, 1)))


def time_shift(start: int, zone: str, rng: np.random.Generator) -> int:
    """Whole days and the zone's distance from UTC at the start [ns]: the copy's UTC shows the log's own wall clock."""
    moment = _EPOCH + timedelta(microseconds=start // 1000)
    try:
        away = moment.astimezone(ZoneInfo(zone)).utcoffset() or timedelta()
    except (ZoneInfoNotFoundError, ValueError, OSError):
        away = timedelta()
    local = int(away.total_seconds()) * 1_000_000_000
    return local + (int(rng.integers(FIRST_DAY, LAST_DAY)) - (start + local) // _DAY) * _DAY


def exact_offset(loop: Loop, record: Record, exponent: int, rng: np.random.Generator) -> float:
    """Draw an offset that changes no digit of a replay, 0 when there is none.

    The numbers between two neighbouring powers of two are evenly spaced. Where all of y and r, with as much room
    again on either side, lies there before and after, a multiple of twice that spacing moves the rounding of y + C dx
    along with it, and every difference of two such values stays as it is.

    Parameters
    ----------
    exponent : int
        a, with which measurement and setpoint are scaled.
    """
    if not _level_free(loop):
        return 0.0
    samples = np.ldexp(np.concatenate([record.y, record.r]), exponent)
    samples = samples[np.isfinite(samples)]
    if not len(samples):
        return 0.0
    low, high = float(samples.min()), float(samples.max())
    low, high = low - (high - low), high + (high - low)
    sign = -1.0 if high < 0 else 1.0
    low, high = (low, high) if sign > 0 else (-high, -low)
    binade = math.frexp(high)[1] - 1
    if low <= math.ldexp(1.0, binade):
        return 0.0
    grain = math.ldexp(1.0, binade - _GRAIN)
    drawn = rng.uniform(math.ldexp(1.0, binade) - low, math.ldexp(1.0, binade + 1) - high)
    offset = sign * math.trunc(drawn / grain) * grain
    levels = np.ldexp(np.array([v for v in _levels(loop) if v is not None]), exponent)
    return offset if is_exact(np.concatenate([samples, levels]), offset) else 0.0


def _level_free(loop: Loop) -> bool:
    """True when only differences of measurements enter: no weighted setpoint, no rule on the measurement itself."""
    controller = loop.controller
    weighted = controller is None or controller.setpoint_weight != 1.0
    return not weighted and all(request.signal != "measurement" for request in loop.rules)


def _levels(loop: Loop) -> Iterable[float | None]:
    signals, limits = loop.signals, loop.limits
    stated = (signals.measurement, signals.setpoint)
    return (limits.low, limits.high, signals.setpoint.value, *(s.low for s in stated), *(s.high for s in stated))


def is_exact(values: FloatArray, offset: float) -> bool:
    """True when ``values + offset`` loses no digit (the error term of Knuth's TwoSum is zero)."""
    total = values + offset
    part = total - values
    return bool(np.all((values - (total - part)) + (offset - part) == 0.0))
