"""Parquet files: every way a time and a number may be stored, and what is refused."""

from __future__ import annotations

from datetime import date, time
from decimal import Decimal
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from written_logs import SECOND, START, problems_of, read

from auditor.errors import Problem
from auditor.logs.log import Log

SECONDS = [START // SECOND, START // SECOND + 60]
TIMES = [START, START + 60 * SECOND]


def write(folder: Path, name: str = "log.parquet", **columns: Any) -> None:
    given = {"level": [2.0, 2.5], "gate": [50, 51]} | columns
    pq.write_table(pa.table(given), folder / name)


def read_parquet(folder: Path, mode: str | None = None, **source: Any) -> Log:
    return read(folder, "log.parquet", mode=mode, **source)


def problem(folder: Path, **source: Any) -> Problem:
    (only,) = problems_of(folder, "log.parquet", **source)
    return only


@pytest.mark.parametrize("unit", ["s", "ms", "us", "ns"])
@pytest.mark.parametrize("zone", [None, "UTC", "+05:30", "Europe/Amsterdam"])
def test_every_timestamp_type_is_read(tmp_path: Path, unit: str, zone: str | None) -> None:
    per_second = {"s": 1, "ms": 10**3, "us": 10**6, "ns": 10**9}[unit]
    stamps = pa.array([s * per_second for s in SECONDS], type=pa.timestamp(unit, zone))
    write(tmp_path, time=stamps)
    log = read_parquet(tmp_path, timezone="UTC" if zone is None else None)
    assert list(log.time) == TIMES
    assert list(log.channels["level"]) == [2.0, 2.5]
    assert log.zone == "UTC"


def test_a_timestamp_without_zone_needs_one(tmp_path: Path) -> None:
    write(tmp_path, time=pa.array([s * 1000 for s in SECONDS], type=pa.timestamp("ms")))
    assert "timezone" in problem(tmp_path).do
    # Amsterdam is an hour ahead of UTC in January.
    assert read_parquet(tmp_path, timezone="Europe/Amsterdam").time[0] == START - 3600 * SECOND


@pytest.mark.parametrize(
    ("column", "unit"),
    [
        (pa.array(SECONDS, type=pa.int64()), "s"),
        (pa.array(SECONDS, type=pa.uint32()), "s"),
        (pa.array([float(s) for s in SECONDS]), "s"),
        (pa.array([s * 1000 for s in SECONDS]), "ms"),
        (pa.array([s * 1e6 for s in SECONDS]), "us"),
        (pa.array([s * SECOND for s in SECONDS]), "ns"),
        (pa.array([Decimal(s).scaleb(0) for s in SECONDS], type=pa.decimal128(20, 3)), "s"),
        (pa.array([str(s) for s in SECONDS]), "s"),
    ],
)
def test_epochs_are_read_in_their_unit_and_refused_without(tmp_path: Path, column: pa.Array, unit: str) -> None:
    write(tmp_path, time=column)
    assert list(read_parquet(tmp_path, time_unit=unit).time) == TIMES
    assert f'time_unit = "{unit}"' in problem(tmp_path).do


def test_float_epochs_mean_their_shortest_decimal(tmp_path: Path) -> None:
    # The double next to 1735689600.1 is 95 ns away from it; what was meant is a tenth of a second.
    write(tmp_path, time=[SECONDS[0] + 0.1, SECONDS[0] + 0.2])
    assert list(read_parquet(tmp_path, time_unit="s").time) == [START + SECOND // 10, START + SECOND // 5]


@pytest.mark.parametrize(
    ("day", "clock"),
    [
        (["2025-01-01"] * 2, ["00:00:00", "00:01:00"]),
        ([date(2025, 1, 1)] * 2, [time(0, 0), time(0, 1)]),
        (pa.array([START // 10**6] * 2, type=pa.timestamp("ms")), ["00:00", "00:01"]),
    ],
)
def test_date_and_clock_columns_are_read_together(tmp_path: Path, day: Any, clock: Any) -> None:
    write(tmp_path, date=day, clock=clock)
    assert list(read_parquet(tmp_path, time="date + clock", timezone="UTC").time) == TIMES


@pytest.mark.parametrize("kind", [pa.string(), pa.large_string(), pa.dictionary(pa.int8(), pa.string())])
def test_text_stamps_are_read(tmp_path: Path, kind: pa.DataType) -> None:
    write(tmp_path, time=pa.array(["2025-01-01T00:00:00Z", "2025-01-01t00:01:00z"]).cast(kind))
    assert list(read_parquet(tmp_path).time) == TIMES


def test_a_date_alone_is_its_local_midnight(tmp_path: Path) -> None:
    write(tmp_path, time=pa.array([date(2025, 1, 1), date(2025, 1, 2)]))
    assert list(read_parquet(tmp_path, timezone="UTC").time) == [START, START + 86400 * SECOND]


@pytest.mark.parametrize(
    "column",
    [
        pa.array([2, 4], type=pa.int16()),
        pa.array([2.0, 4.0], type=pa.float32()),
        pa.array([Decimal("2.00"), Decimal("4.00")], type=pa.decimal128(10, 2)),
        pa.array([2.0, 4.0]).dictionary_encode(),
        pa.array(["2", " 4.0"]),
        pa.array(["2", "4"]).dictionary_encode(),
    ],
)
def test_every_number_type_becomes_a_float(tmp_path: Path, column: pa.Array) -> None:
    write(tmp_path, time=pa.array(TIMES, type=pa.timestamp("ns", "UTC")), level=column)
    level = read_parquet(tmp_path).channels["level"]
    assert level.dtype == np.float64
    assert list(level) == [2.0, 4.0]


def test_missing_and_text_cells_are_told_apart(tmp_path: Path) -> None:
    times = pa.array([*TIMES, TIMES[1] + SECOND, TIMES[1] + 2 * SECOND], type=pa.timestamp("ns", "UTC"))
    write(tmp_path, time=times, level=["1", None, "Bad", "2"], gate=[1.0, None, float("nan"), float("inf")])
    log = read_parquet(tmp_path)
    np.testing.assert_array_equal(log.channels["level"], [1, np.nan, np.nan, 2])
    np.testing.assert_array_equal(log.channels["gate"], [1, np.nan, np.nan, np.nan])
    assert list(log.texts["level"]) == [None, None, "Bad", None]
    assert list(log.texts["gate"]) == [None, None, None, "inf"]
    assert [finding.detail for finding in log.findings] == ['1 × "Bad"', '1 × "inf"']


@pytest.mark.parametrize(
    ("column", "words"),
    [
        (["AUTO", None], ["AUTO", ""]),
        ([1, 2], ["1", "2"]),
        ([1.0, None], ["1", ""]),
        ([1.5, 2.0], ["1.5", "2"]),
        ([True, False], ["true", "false"]),
        (pa.array(["AUTO", "MAN"]).dictionary_encode(), ["AUTO", "MAN"]),
    ],
)
def test_the_mode_is_text_whatever_its_type(tmp_path: Path, column: Any, words: list[str]) -> None:
    write(tmp_path, time=pa.array(TIMES, type=pa.timestamp("ns", "UTC")), mode=column)
    assert list(read_parquet(tmp_path, mode="mode").texts["mode"]) == words


def test_parquet_and_text_may_be_mixed(tmp_path: Path) -> None:
    write(tmp_path, time=pa.array(SECONDS, type=pa.timestamp("s", "UTC")))
    (tmp_path / "log.csv").write_text("time,level,gate\n2025-01-01T00:02:00Z,3,52\n")
    log = read(tmp_path, "log.csv", "log.parquet")
    assert list(log.time) == [*TIMES, START + 120 * SECOND]
    assert list(log.channels["gate"]) == [50.0, 51.0, 52.0]


def test_a_folder_of_parquet_is_one_log(tmp_path: Path) -> None:
    for day, name in ((1, "2025/b.parquet"), (0, "2025/c.parquet")):
        (tmp_path / "store/2025").mkdir(parents=True, exist_ok=True)
        stamps = [t + day * 86400 * SECOND for t in TIMES]
        write(tmp_path / "store", name, time=pa.array(stamps, type=pa.timestamp("ns", "UTC")))
    (tmp_path / "store" / "_SUCCESS.parquet").write_text("")
    log = read(tmp_path, "store")
    assert list(log.time - START) == [0, 60 * SECOND, 86400 * SECOND, 86460 * SECOND]
    assert [file.path for file in log.inputs] == ["store/2025/b.parquet", "store/2025/c.parquet"]


def test_column_names_with_dots_are_read(tmp_path: Path) -> None:
    pq.write_table(
        pa.table({"t.utc": ["2025-01-01T00:00:00Z"], "level": [1.0], "gate": [2.0]}), tmp_path / "log.parquet"
    )
    assert read_parquet(tmp_path, time="t.utc").time[0] == START


# --- What cannot be used


def test_a_row_without_a_time_is_refused(tmp_path: Path) -> None:
    write(tmp_path, time=pa.array([TIMES[0], None], type=pa.timestamp("ns", "UTC")))
    only = problem(tmp_path)
    assert "row 2" in only.where
    assert only.found == "an empty cell"


@pytest.mark.parametrize(
    ("columns", "what"),
    [
        ({"time": [True, False]}, "no times"),
        ({"time": pa.array([[1], [2]])}, "single values"),
        ({"level": pa.array(TIMES, type=pa.timestamp("ns"))}, 'Column "level" holds no numbers'),
        ({"level": ["x", "y"]}, "mostly text"),
        ({"level": ["1,5", "2.5"]}, "another decimal sign"),
        ({"time": pa.array([10**13, 0], type=pa.timestamp("s", "UTC"))}, "out of reach"),
    ],
)
def test_columns_of_another_kind_are_refused(tmp_path: Path, columns: dict[str, Any], what: str) -> None:
    write(tmp_path, **({"time": pa.array(TIMES, type=pa.timestamp("ns", "UTC"))} | columns))
    only = problem(tmp_path)
    assert what in only.what
    assert "log.parquet" in only.where


def test_missing_columns_and_rows_are_refused(tmp_path: Path) -> None:
    pq.write_table(pa.table({"clock": [1], "Level": [1.0], "gate": [1.0]}), tmp_path / "log.parquet")
    problems = problems_of(tmp_path, "log.parquet")
    assert [item.what for item in problems] == ['The log has no column "time".', 'The log has no column "level".']
    assert 'did you mean "Level"?' in problems[1].do
    write(tmp_path, time=pa.array([], type=pa.int64()), level=pa.array([], pa.float64()), gate=pa.array([], pa.int8()))
    assert "no rows" in problem(tmp_path, time_unit="s").what


def test_a_damaged_file_is_refused(tmp_path: Path) -> None:
    write(tmp_path, time=TIMES)
    path = tmp_path / "log.parquet"
    path.write_bytes(path.read_bytes()[:-20])
    assert "damaged" in problem(tmp_path).what
