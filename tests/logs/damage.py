"""Every kind of damage a finding tells, done to a clean log at a random place: `DAMAGE` by the kind of finding."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from logs_in_memory import AUTOMATIC, with_channel, with_mode, with_rows

from auditor.logs.findings.series import usual_change, usual_run
from auditor.logs.log import Log
from auditor.loop import Exclusion, Loop

Damaged = tuple[Log, Loop]
Generator = np.random.Generator


def names(loop: Loop) -> tuple[str, str, str]:
    """Return the columns of measurement, setpoint and actuator."""
    signals = loop.signals
    return str(signals.measurement.column), str(signals.setpoint.column), str(signals.actuator.column)


def with_signal(loop: Loop, role: str, **changes: object) -> Loop:
    """Return the loop with changes to one signal."""
    signal = replace(getattr(loop.signals, role), **changes)
    return replace(loop, signals=replace(loop.signals, **{role: signal}))


def a_place(log: Log, rng: Generator, length: int = 1) -> int:
    """Return a row to begin at, away from both ends."""
    return int(rng.integers(20, log.rows - length - 20))


def places(log: Log, rng: Generator, count: int) -> np.ndarray:
    """Return rows, at least five apart."""
    return np.sort(5 * rng.choice(np.arange(4, log.rows // 5 - 4), count, replace=False) + 2)


def with_measured(log: Log, loop: Loop, change: Callable[[np.ndarray], None]) -> Damaged:
    """Return the log with a change to its measurement, done in place on a copy."""
    name = names(loop)[0]
    values = log.channels[name].copy()
    change(values)
    return with_channel(log, **{name: values}), loop


def stray_stamp(log: Log, loop: Loop, rng: Generator) -> Damaged:
    time = log.time.copy()
    time[a_place(log, rng)] += 10**18
    return replace(log, time=time), loop


def backward_clock(log: Log, loop: Loop, rng: Generator) -> Damaged:
    rows = np.arange(log.rows)
    k = a_place(log, rng)
    rows[[k, k + 1]] = k + 1, k
    return with_rows(log, rows), loop


def duplicate(log: Log, loop: Loop, rng: Generator) -> Damaged:
    twice = places(log, rng, 3)
    return with_rows(log, np.sort(np.concatenate((np.arange(log.rows), twice)))), loop


def clock_step(log: Log, loop: Loop, rng: Generator) -> Damaged:
    time = log.time.copy()
    k = int(rng.integers(50, log.rows - 50))
    time[k:] += round(float(rng.uniform(0.1, 0.4)) * loop.period * 1e9)
    return replace(log, time=time), loop


def clock_drift(log: Log, loop: Loop, rng: Generator) -> Damaged:
    periods = float(rng.choice([-1, 1]) * rng.uniform(0.8, 3))
    since = log.time - log.time[0]
    return replace(log, time=log.time + np.rint(since * (periods / log.rows)).astype(np.int64)), loop


def jitter(log: Log, loop: Loop, rng: Generator) -> Damaged:
    scatter = rng.uniform(-0.2, 0.2, log.rows) * loop.period * 1e9
    return replace(log, time=log.time + scatter.astype(np.int64)), loop


def coarse_log(log: Log, loop: Loop, rng: Generator) -> Damaged:
    return with_rows(log, np.arange(0, log.rows, int(rng.integers(2, 8)))), loop


def fine_log(log: Log, loop: Loop, rng: Generator) -> Damaged:
    return log, replace(loop, period=loop.period * int(rng.integers(2, 6)))


def mixed_period(log: Log, loop: Loop, rng: Generator) -> Damaged:
    k, every = int(rng.integers(200, log.rows - 400)), int(rng.integers(2, 6))
    return with_rows(log, np.concatenate((np.arange(k), np.arange(k, log.rows, every)))), loop


def gap(log: Log, loop: Loop, rng: Generator) -> Damaged:
    length = int(rng.integers(3, 60))
    k = a_place(log, rng, length)
    return with_rows(log, np.delete(np.arange(log.rows), slice(k, k + length))), loop


def bridged(log: Log, loop: Loop, rng: Generator) -> Damaged:
    return with_measured(log, loop, lambda y: y.__setitem__(places(log, rng, 4), np.nan))


def manual(log: Log, loop: Loop, rng: Generator) -> Damaged:
    cells = np.full(log.rows, "AUTO", dtype=object)
    length = int(rng.integers(5, 100))
    k = a_place(log, rng, length)
    cells[k : k + length] = rng.choice(["MAN", "LOCAL"])
    return with_mode(log, cells), replace(loop, signals=replace(loop.signals, mode=AUTOMATIC))


def excluded(log: Log, loop: Loop, rng: Generator) -> Damaged:
    k = a_place(log, rng, 50)
    stretch = Exclusion(start=int(log.time[k]), end=int(log.time[k + 50]), why="pump swap")
    return log, replace(loop, log=replace(loop.log, exclude=(stretch,)))


def bad_value(log: Log, loop: Loop, rng: Generator) -> Damaged:
    name = names(loop)[int(rng.choice([0, 2]))]
    values = log.channels[name].copy()
    length = int(rng.integers(3, 60))
    k = a_place(log, rng, length)
    values[k : k + length] = np.nan
    return with_channel(log, **{name: values}), loop


def on_change(log: Log, loop: Loop, rng: Generator) -> Damaged:
    name = names(loop)[1]
    values = log.channels[name].copy()
    values[1:] = np.where(np.diff(values) == 0, np.nan, values[1:])
    return with_channel(log, **{name: values}), loop


def sentinel(log: Log, loop: Loop, rng: Generator) -> Damaged:
    level = float(rng.choice([-9999.0, 999999.0, -32768.0, 1e30]))
    return with_measured(log, loop, lambda y: y.__setitem__(places(log, rng, 3), level))


def out_of_range(log: Log, loop: Loop, rng: Generator) -> Damaged:
    y = log.channels[names(loop)[0]]
    reach = float(np.ptp(y))
    stated = with_signal(loop, "measurement", low=float(y.min()) - 0.1 * reach, high=float(y.max()) + 0.1 * reach)
    beyond = float(y.max() + rng.uniform(0.2, 2) * reach)
    return with_measured(log, stated, lambda v: v.__setitem__(places(log, rng, 4), beyond))


def spike(log: Log, loop: Loop, rng: Generator) -> Damaged:
    def change(y: np.ndarray) -> None:
        usual = usual_change(y, loop.signals.measurement.resolution)
        at = places(log, rng, int(rng.integers(1, 6)))
        y[at] += rng.choice([-1, 1], len(at)) * rng.uniform(20, 60, len(at)) * usual

    return with_measured(log, loop, change)


def sensor_reset(log: Log, loop: Loop, rng: Generator) -> Damaged:
    def change(y: np.ndarray) -> None:
        level = float(y.min() - rng.uniform(20, 40) * usual_change(y, loop.signals.measurement.resolution))
        if rng.random() < 0.5:
            y[places(log, rng, 3)] = level
        else:
            k = a_place(log, rng, 15)
            y[k : k + int(rng.integers(3, 15))] = level

    return with_measured(log, loop, change)


def range_wrap(log: Log, loop: Loop, rng: Generator) -> Damaged:
    turn = float(rng.choice([360.0, 2 * np.pi, 4096.0]))

    def change(y: np.ndarray) -> None:
        turns = (y - np.quantile(y, rng.uniform(0.3, 0.7))) / np.ptp(y)
        y[:] = turn * (turns % 1.0)

    return with_measured(log, with_signal(loop, "measurement", resolution=None), change)


def unit_change(log: Log, loop: Loop, rng: Generator) -> Damaged:
    factor = float(rng.choice([100.0, 0.01, 3.2808, 0.3048, 10.0]))
    k = int(rng.integers(150, log.rows - 150))
    return with_measured(
        log, with_signal(loop, "measurement", resolution=None), lambda y: y.__setitem__(slice(k, None), factor * y[k:])
    )


def stuck(log: Log, loop: Loop, rng: Generator) -> Damaged:
    length = int(max(20, 10 * usual_run(log.channels[names(loop)[0]])) + rng.integers(5, 60))
    k = a_place(log, rng, length)
    return with_measured(log, loop, lambda y: y.__setitem__(slice(k, k + length), y[k]))


def stale_hold(log: Log, loop: Loop, rng: Generator) -> Damaged:
    usual = usual_run(log.channels[names(loop)[0]])
    shortest = 5 if usual <= 1 else int(5 * usual) + 1
    length = int(rng.integers(shortest, max(20, int(10 * usual)) - 2))
    k, usually = a_place(log, rng, length), np.mean(np.diff(log.channels[names(loop)[2]]) != 0)
    while np.mean(np.diff(log.channels[names(loop)[2]][k : k + length]) != 0) < usually:
        k = a_place(log, rng, length)  # an actuator that stands as well tells nothing
    return with_measured(log, loop, lambda y: y.__setitem__(slice(k, k + length), y[k]))


def interpolated(log: Log, loop: Loop, rng: Generator) -> Damaged:
    knots = np.arange(0, log.rows, int(rng.integers(6, 15)))
    log = with_rows(log, np.arange(knots[-1] + 1))
    loop = with_signal(loop, "measurement", resolution=None)
    return with_measured(log, loop, lambda y: y.__setitem__(slice(None), np.interp(np.arange(len(y)), knots, y[knots])))


def exception_reported(log: Log, loop: Loop, rng: Generator) -> Damaged:
    def change(y: np.ndarray) -> None:
        band = float(rng.uniform(2.5, 5)) * usual_change(y, loop.signals.measurement.resolution)
        for k in range(1, len(y)):
            y[k] = y[k] if abs(y[k] - y[k - 1]) > band else y[k - 1]

    return with_measured(log, loop, change)


def quantised(log: Log, loop: Loop, rng: Generator) -> Damaged:
    def change(y: np.ndarray) -> None:
        step = float(rng.uniform(0.3, 2)) * usual_change(y, None)
        y[:] = step * np.round(y / step)

    return with_measured(log, loop, change)


def saturation(log: Log, loop: Loop, rng: Generator) -> Damaged:
    name = names(loop)[2]
    values = log.channels[name]
    high = float(np.quantile(values, rng.uniform(0.7, 0.95)))
    loop = with_signal(loop, "actuator", high=float(rng.choice([high, np.inf])))
    if loop.signals.actuator.high == np.inf:
        loop = with_signal(loop, "actuator", high=None)
    return with_channel(log, **{name: np.minimum(values, high)}), loop


def constant_actuator(log: Log, loop: Loop, rng: Generator) -> Damaged:
    name = names(loop)[2]
    return with_channel(log, **{name: np.full(log.rows, rng.choice(log.channels[name]))}), loop


def setpoint_ramp(log: Log, loop: Loop, rng: Generator) -> Damaged:
    name = names(loop)[1]
    values = log.channels[name].copy()
    length = int(rng.integers(15, 100))
    k = a_place(log, rng, length)
    rise = float(rng.choice([-1, 1])) * float(np.std(log.channels[names(loop)[0]]))
    values[k : k + length] = values[k - 1] + rise * np.linspace(1 / length, 1, length)
    values[k + length :] += rise
    return with_channel(log, **{name: values}), loop


DAMAGE: dict[str, Callable[[Log, Loop, Generator], Damaged]] = {
    "stray-stamp": stray_stamp,
    "backward-clock": backward_clock,
    "duplicate": duplicate,
    "clock-step": clock_step,
    "clock-drift": clock_drift,
    "jitter": jitter,
    "coarse-log": coarse_log,
    "fine-log": fine_log,
    "mixed-period": mixed_period,
    "gap": gap,
    "bridged": bridged,
    "manual": manual,
    "excluded": excluded,
    "bad-value": bad_value,
    "on-change": on_change,
    "sentinel": sentinel,
    "out-of-range": out_of_range,
    "spike": spike,
    "sensor-reset": sensor_reset,
    "range-wrap": range_wrap,
    "unit-change": unit_change,
    "stuck": stuck,
    "stale-hold": stale_hold,
    "interpolated": interpolated,
    "exception-reported": exception_reported,
    "quantised": quantised,
    "setpoint-ramp": setpoint_ramp,
    "saturation": saturation,
    "constant-actuator": constant_actuator,
}
"""By the kind of finding that must tell it; a function takes log, loop and generator and returns the damaged two."""
