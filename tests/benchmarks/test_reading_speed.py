"""Reading speed, as a ratio to the bare table reader within the same run: 1,000,000 rows × 4 columns."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.csv
import pyarrow.parquet
import pytest

from auditor.logs.reader import read_log
from auditor.loop import Actuator, LogSource, Loop, Signal, Signals

ROWS = 1_000_000
# Beyond bare reading, the input is hashed, stamps become nanoseconds UTC and cells are checked. Measured on a busy
# 2-core machine: 1.4 for plain stamps, 2.4 for national dates, 2.1 for Parquet; 5 is what was asked for.
MOST = 5.0


def loop(path: Path, **source: Any) -> Loop:
    signals = Signals(
        measurement=Signal(column="level"), setpoint=Signal(column="target"), actuator=Actuator(column="gate")
    )
    return Loop(
        name="pool", period=1.0, log=LogSource(paths=(path.name,), folder=path.parent, **source), signals=signals
    )


def table(time_format: str) -> pa.Table:
    numbers = np.random.default_rng(7)
    stamps = pa.array(np.datetime64("2025-01-01T00:00:00") + np.arange(ROWS) * np.timedelta64(1, "s"))
    columns = {name: np.round(numbers.normal(size=ROWS), 4) for name in ("level", "target", "gate")}
    return pa.table({"time": pc.strftime(stamps, time_format), **columns})


def shortest(action: Callable[[], object], times: int = 3) -> float:
    action()  # the first run fills caches
    durations = []
    for _ in range(times):
        start = time.perf_counter()
        action()
        durations.append(time.perf_counter() - start)
    return min(durations)


@pytest.mark.benchmark
@pytest.mark.parametrize(
    ("time_format", "source"),
    [("%Y-%m-%dT%H:%M:%SZ", {}), ("%d.%m.%Y %H:%M:%S", {"timezone": "Europe/Amsterdam"})],
)
def test_text_logs_are_read_at_the_speed_of_the_table_reader(
    tmp_path: Path, time_format: str, source: dict[str, Any], record_property: Callable[[str, object], None]
) -> None:
    path = tmp_path / "log.csv"
    pa.csv.write_csv(table(time_format), path, pa.csv.WriteOptions(quoting_style="none"))
    assert read_log(loop(path, **source)).rows == ROWS
    ratio = shortest(lambda: read_log(loop(path, **source))) / shortest(lambda: pa.csv.read_csv(path))
    record_property("ratio", ratio)
    print(f"text, {time_format}: {ratio:.2f} × bare")
    assert ratio <= MOST


@pytest.mark.benchmark
def test_parquet_is_read_at_the_speed_of_the_table_reader(
    tmp_path: Path, record_property: Callable[[str, object], None]
) -> None:
    path = tmp_path / "log.parquet"
    columns = table("%Y-%m-%dT%H:%M:%SZ")
    stamps = pc.cast(columns["time"], pa.timestamp("us", "UTC"))
    pa.parquet.write_table(columns.set_column(0, "time", stamps), path)
    assert read_log(loop(path)).rows == ROWS
    ratio = shortest(lambda: read_log(loop(path))) / shortest(lambda: pa.parquet.read_table(path))
    record_property("ratio", ratio)
    print(f"Parquet: {ratio:.2f} × bare")
    assert ratio <= MOST
