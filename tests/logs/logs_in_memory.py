"""Logs built in memory: a clean canal pool under PI control, and the loop that describes it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from scipy.signal import lfilter

from auditor.logs.log import Log
from auditor.loop import Actuator, Exclusion, LogSource, Loop, Mode, Signal, Signals

START = 1_740_787_200_000_000_000  # 2025-03-01T00:00:00Z
PERIOD = 60.0
NS = 1_000_000_000


def pool_loop(period: float = PERIOD, exclude: tuple[Exclusion, ...] = (), **signals: Any) -> Loop:
    """Describe the pool; `signals` replaces single roles."""
    roles: dict[str, Any] = {
        "measurement": Signal(column="level", unit="m"),
        "setpoint": Signal(column="target", unit="m"),
        "actuator": Actuator(column="gate", unit="%"),
    }
    roles.update(signals)
    source = LogSource(paths=("pool.csv",), folder=Path("."), exclude=exclude)
    return Loop(name="pool", period=period, log=source, signals=Signals(**roles))


AUTOMATIC = Mode(column="mode", automatic=("AUTO", 1))


def pool_channels(rows: int, seed: int = 0) -> dict[str, np.ndarray]:
    """Return a noisy level around a target with steps, and a gate that answers; full resolution everywhere."""
    generator = np.random.default_rng(seed)
    target = np.repeat([2.0, 2.1, 2.0, 1.95, 2.05], -(-rows // 5))[:rows]
    level = target + lfilter([1.0], [1.0, -0.95], generator.normal(0, 0.01, rows)) + generator.normal(0, 0.005, rows)
    gate = 50 + lfilter([1.0], [1.0, -0.98], generator.normal(0, 0.5, rows)) + 12 * (target - level)
    return {"level": level, "target": target, "gate": gate}


def stamps_of(rows: int, period: float = PERIOD, start: int = START) -> np.ndarray:
    """Return evenly spaced stamps [ns]."""
    return start + np.rint(np.arange(rows) * (period * NS)).astype(np.int64)


def pool_log(rows: int = 2000, period: float = PERIOD, seed: int = 0, **more: np.ndarray) -> Log:
    """Return the clean log; `more` replaces or adds channels."""
    channels = pool_channels(rows, seed)
    channels.update(more)
    return Log(time=stamps_of(rows, period), channels=channels, rows=rows)


def with_channel(log: Log, **channels: np.ndarray) -> Log:
    """Return the log with other values in some columns."""
    return replace(log, channels={**log.channels, **channels})


def with_rows(log: Log, rows: np.ndarray, time: np.ndarray | None = None) -> Log:
    """Return the log with these rows only, in this order, with other stamps if given."""
    stamps = log.time[rows] if time is None else time
    channels: Mapping[str, np.ndarray] = {name: values[rows] for name, values in log.channels.items()}
    texts = {name: values[rows] for name, values in log.texts.items()}
    return replace(log, time=stamps, channels=channels, texts=texts, rows=len(stamps))


def with_mode(log: Log, cells: np.ndarray) -> Log:
    """Return the log with a mode column."""
    return replace(log, texts={**log.texts, "mode": cells})
