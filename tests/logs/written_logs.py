"""Logs of a canal pool written to files, and the loop that reads them."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any

import pytest

from auditor.errors import LogError, Problem
from auditor.logs.log import Log
from auditor.logs.reader import read_log
from auditor.loop import Actuator, LogSource, Loop, Mode, Signal, Signals

SECOND = 1_000_000_000
START = 1_735_689_600 * SECOND  # 2025-01-01T00:00:00Z


def pool_loop(folder: Path, *paths: str, mode: str | None = None, **source: Any) -> Loop:
    """A pool whose log has the columns time, level and gate, with a constant setpoint."""
    signals = Signals(
        measurement=Signal(column="level", unit="m"),
        setpoint=Signal(value=2.0, unit="m"),
        actuator=Actuator(column="gate", unit="%"),
        mode=Mode(column=mode, automatic=("AUTO",)) if mode is not None else None,
    )
    log = LogSource(paths=paths or ("log.csv",), folder=folder, **source)
    return Loop(name="pool-7-level", period=60.0, log=log, signals=signals)


def read(folder: Path, *paths: str, mode: str | None = None, **source: Any) -> Log:
    """Read files of `folder` as the pool's log."""
    return read_log(pool_loop(folder, *paths, mode=mode, **source))


def read_text(folder: Path, text: str | bytes, **source: Any) -> Log:
    """Write `text` as log.csv (UTF-8, line ends as given) and read it."""
    raw = text.encode() if isinstance(text, str) else text
    (folder / "log.csv").write_bytes(raw)
    return read(folder, **source)


def read_times(folder: Path, stamps: Iterable[str], **source: Any) -> list[int]:
    """Write one row per stamp and return the times read [ns since 1970 UTC]."""
    rows = "".join(f'"{stamp}",2.0,50\n' for stamp in stamps)
    return [int(time) for time in read_text(folder, "time,level,gate\n" + rows, **source).time]


def problems_of(folder: Path, *paths: str, mode: str | None = None, **source: Any) -> tuple[Problem, ...]:
    """Return the problems that reading must raise."""
    with pytest.raises(LogError) as raised:
        read(folder, *paths, mode=mode, **source)
    return raised.value.problems


def problem_of_text(folder: Path, text: str | bytes, **source: Any) -> Problem:
    """Write `text` as log.csv and return the one problem that reading it must raise."""
    (folder / "log.csv").write_bytes(text.encode() if isinstance(text, str) else text)
    (problem,) = problems_of(folder, **source)
    return problem


def problem_of_times(folder: Path, stamps: Iterable[str], **source: Any) -> Problem:
    """Write one row per stamp and return the one problem that reading must raise."""
    return problem_of_text(folder, "time,level,gate\n" + "".join(f'"{s}",2.0,50\n' for s in stamps), **source)
