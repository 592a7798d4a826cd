"""Logs with one row per time and tag."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet
import pytest
from logs_in_memory import pool_channels, pool_log, stamps_of
from logs_in_memory import pool_loop as loop_in_memory

from auditor.errors import LogError, Problem
from auditor.logs.align import align
from auditor.logs.log import Log
from auditor.logs.reader import read_log
from auditor.logs.record import Record
from auditor.loop import Loop, Mode, Signal

ROWS = 1500
MS = 1_000_000
TAGS = {"level": "LT7.PV", "target": "LC7.SP", "gate": "GV7.POS"}


def long_loop(
    folder: Path, mode: str | None = None, measurement: Mapping[str, Any] | None = None, **source: Any
) -> Loop:
    signals = {role: Signal(column=TAGS[column]) for role, column in (("measurement", "level"), ("setpoint", "target"))}
    signals["measurement"] = dataclasses.replace(signals["measurement"], **(measurement or {}))
    loop = loop_in_memory(**signals, **({"mode": Mode(column=mode, automatic=("AUTO",))} if mode else {}))
    actuator = dataclasses.replace(loop.signals.actuator, column=TAGS["gate"])
    log = dataclasses.replace(loop.log, paths=("log.csv",), folder=folder, layout="long", **source)
    return dataclasses.replace(loop, log=log, signals=dataclasses.replace(loop.signals, actuator=actuator))


def long_table(
    late: Mapping[str, int] | None = None, rows: Mapping[str, np.ndarray] | None = None, one_after_another: bool = False
) -> pa.Table:
    """The pool's log in the long layout, each tag `late` by some milliseconds, with some of its `rows` only."""
    channels, stamps = pool_channels(ROWS), stamps_of(ROWS)
    pieces = []
    for column, tag in TAGS.items():
        kept = np.arange(ROWS) if rows is None or column not in rows else np.asarray(rows[column])
        time = pa.array(stamps[kept] + (late or {}).get(column, 0) * MS, pa.timestamp("ns", "UTC"))
        values = pa.array(np.round(channels[column][kept], 9))
        pieces.append(pa.table({"time": time, "tag": pa.array([tag] * len(kept)), "value": values}))
    table = pa.concat_tables(pieces)
    return table if one_after_another else table.sort_by([("time", "ascending"), ("tag", "ascending")])


def write(folder: Path, table: pa.Table) -> None:
    pa.csv.write_csv(table, folder / "log.csv")


def record_of(folder: Path, loop: Loop | None = None) -> Record:
    loop = loop or long_loop(folder)
    return align(read_log(loop), loop)


def wide_record() -> Record:
    """What the same signals give from a wide log."""
    log = pool_log(ROWS)
    return align(
        dataclasses.replace(log, channels={n: np.round(v, 9) for n, v in log.channels.items()}), loop_in_memory()
    )


def read_rows(folder: Path, rows: Sequence[str], header: str = "time,tag,value", **more: Any) -> Log:
    (folder / "log.csv").write_text("\n".join([header, *rows]) + "\n")
    return read_log(long_loop(folder, **more))


def problems_of(folder: Path, rows: Sequence[str], **more: Any) -> tuple[Problem, ...]:
    with pytest.raises(LogError) as raised:
        read_rows(folder, rows, **more)
    return raised.value.problems


def cell(minute: int, tag: str, value: object) -> str:
    return f"2025-03-01T00:{minute:02}:00Z,{tag},{value}"


def three(minute: int, *values: object) -> list[str]:
    return [cell(minute, tag, value) for tag, value in zip(TAGS.values(), values, strict=True)]


def assert_same(record: Record, other: Record) -> None:
    for name in ("y", "r", "u", "valid"):
        np.testing.assert_array_equal(getattr(record, name), getattr(other, name))
    assert (record.start, record.spans) == (other.start, other.spans)


@pytest.mark.parametrize("one_after_another", [False, True])
@pytest.mark.parametrize("suffix", ["csv", "parquet"])
def test_a_long_log_gives_the_record_of_the_wide_one(tmp_path: Path, suffix: str, one_after_another: bool) -> None:
    table = long_table(one_after_another=one_after_another)
    if suffix == "csv":
        write(tmp_path, table)
    else:
        table = table.set_column(1, "tag", table.column("tag").dictionary_encode())
        pa.parquet.write_table(table, tmp_path / "log.csv", row_group_size=700)
    record, wide = record_of(tmp_path), wide_record()
    assert_same(record, wide)
    assert [f.kind for f in record.findings] == [f.kind for f in wide.findings]
    assert record.rows == 3 * ROWS


def test_one_file_per_tag(tmp_path: Path) -> None:
    table = long_table()
    for n, tag in enumerate(TAGS.values()):
        pa.csv.write_csv(table.filter(pa.compute.equal(table.column("tag"), tag)), tmp_path / f"{n}.csv")
    loop = long_loop(tmp_path)
    record = record_of(tmp_path, dataclasses.replace(loop, log=dataclasses.replace(loop.log, paths=("*.csv",))))
    assert_same(record, wide_record())


@pytest.mark.parametrize("late", [{"gate": 40, "target": -25}, {"gate": -40, "level": 30}, {"gate": 900}])
def test_tags_some_milliseconds_apart_are_one_sample(tmp_path: Path, late: dict[str, int]) -> None:
    write(tmp_path, long_table(late))
    record, wide = record_of(tmp_path), wide_record()
    for name in ("y", "r", "u"):
        np.testing.assert_array_equal(getattr(record, name), getattr(wide, name))
    assert record.spans == wide.spans
    assert record.start - wide.start == late.get("level", 0) * MS
    assert [f.kind for f in record.findings] == [f.kind for f in wide.findings]


def test_scattered_stamps_are_one_sample(tmp_path: Path) -> None:
    table = long_table()
    scatter = np.random.default_rng(5).integers(-80, 81, table.num_rows) * MS
    time = pa.array(table.column("time").cast(pa.int64()).to_numpy() + scatter, pa.timestamp("ns", "UTC"))
    write(tmp_path, table.set_column(0, "time", time))
    record, wide = record_of(tmp_path), wide_record()
    for name in ("y", "r", "u"):
        np.testing.assert_array_equal(getattr(record, name), getattr(wide, name))


def test_newest_row_first(tmp_path: Path) -> None:
    table = long_table()
    write(tmp_path, table.take(pa.array(np.arange(table.num_rows)[::-1])))
    record = record_of(tmp_path)
    assert_same(record, wide_record())
    assert [f.count for f in record.findings if f.kind == "backward-clock"] == [ROWS - 1]
    assert "duplicate" not in [f.kind for f in record.findings]


def test_a_tag_stored_on_change_is_held_when_stated(tmp_path: Path) -> None:
    some = np.unique(np.append(0, np.random.default_rng(3).choice(ROWS, ROWS // 4, replace=False)))
    write(tmp_path, long_table(rows={"level": some}))
    record = record_of(tmp_path, long_loop(tmp_path, measurement={"stored": "on-change"}))
    wide = wide_record()
    expected = wide.y[some[np.searchsorted(some, np.arange(ROWS), side="right") - 1]]
    np.testing.assert_array_equal(record.y, expected)
    np.testing.assert_array_equal(record.u, wide.u)
    assert len(record.spans) == 1


def test_an_actuator_stored_on_change_is_suspected(tmp_path: Path) -> None:
    some = np.unique(np.append(0, np.random.default_rng(3).choice(ROWS, ROWS // 4, replace=False)))
    write(tmp_path, long_table(rows={"gate": some}))
    (found,) = [f for f in record_of(tmp_path).findings if f.kind == "on-change" and f.signal == TAGS["gate"]]
    assert 'stored = "on-change"' in found.effect
    assert found.count == len(some)


def test_rows_that_only_another_tag_has_are_no_bad_values(tmp_path: Path) -> None:
    kept = np.delete(np.arange(ROWS), np.s_[400:450])
    write(tmp_path, long_table(rows={"level": kept}))
    record = record_of(tmp_path)
    assert record.lost_hours == {"gap": pytest.approx(50 / 60)}
    assert "bad-value" not in [f.kind for f in record.findings]


def test_repeated_rows_of_one_tag_are_told(tmp_path: Path) -> None:
    rows = [*three(0, 2.0, 2.1, 50), cell(0, TAGS["level"], 2.5), cell(0, TAGS["gate"], 50), *three(1, 2.2, 2.1, 51)]
    log = read_rows(tmp_path, rows)
    assert len(log.time) == 3
    np.testing.assert_array_equal(log.channels[TAGS["level"]], [2.0, 2.5, 2.2])
    np.testing.assert_array_equal(log.channels[TAGS["gate"]], [50, 50, 51])
    np.testing.assert_array_equal(log.channels[TAGS["target"]], [2.1, np.nan, 2.1])
    assert log.own[TAGS["target"]].tolist() == [True, False, True]


def test_the_mode_tag_may_hold_words(tmp_path: Path) -> None:
    rows = [*three(0, 2.0, 2.1, 50), cell(0, "LC7.MODE", "AUTO"), *three(1, 2.2, 2.1, 51), cell(2, "LC7.MODE", "MAN")]
    log = read_rows(tmp_path, rows, mode="LC7.MODE")
    assert log.texts["LC7.MODE"].tolist() == ["AUTO", "", "MAN"]
    np.testing.assert_array_equal(log.channels[TAGS["level"]], [2.0, 2.2, np.nan])


def test_a_clock_set_back_is_seen_in_the_rows_of_the_measurement(tmp_path: Path) -> None:
    table = long_table()
    # The clock is set back by 100 minutes and some after row 800: the tags run over that stretch twice.
    ns = table.column("time").cast(pa.int64()).to_numpy().copy()
    ns[3 * 800 :] -= (100 * 60_000 + 20_000) * MS
    write(tmp_path, table.set_column(0, "time", pa.array(ns, pa.timestamp("ns", "UTC"))))
    found = {f.kind: f for f in record_of(tmp_path).findings}
    assert found["backward-clock"].count == 1
    assert "ran over 1 stretch twice" in found["backward-clock"].detail


def test_the_repeated_hour_is_told_by_the_order_of_each_tags_rows(tmp_path: Path) -> None:
    clock = ["02:58", "02:59", *[f"02:{m:02}" for m in range(2)], "03:00"]
    # One tag after the other, so that the joined rows step back although no tag's clock does more than once.
    rows = [f"2025-10-26 {time}:00,{tag},{n}" for tag in TAGS.values() for n, time in enumerate(clock)]
    log = read_rows(tmp_path, rows, timezone="Europe/Amsterdam")
    assert np.diff(log.time).tolist() == [60 * 10**9, 60 * 10**9, 60 * 10**9, 59 * 60 * 10**9]
    np.testing.assert_array_equal(log.channels[TAGS["gate"]], [0, 1, 2, 3, 4])


def test_a_tag_that_is_not_there_is_named_with_the_nearest(tmp_path: Path) -> None:
    rows = [cell(0, "lt7.pv", 2.0), cell(0, "LC7.SP1", 2.1), cell(0, "PUMP", 1)]
    level, target, gate = problems_of(tmp_path, rows)
    assert level.do == 'did you mean "lt7.pv"?'
    assert target.do == 'did you mean "LC7.SP1"?'
    assert 'tags "LC7.SP1", "PUMP", "lt7.pv"' in gate.found
    assert "signals.actuator" in gate.expected


def test_columns_that_are_not_there_are_named(tmp_path: Path) -> None:
    problems = problems_of(tmp_path, three(0, 2.0, 2.1, 50), tag="name", value="val", quality="q")
    assert [p.what for p in problems] == [f'The log has no column "{name}".' for name in ("val", "name", "q")]


def test_a_row_is_found_again_in_the_file(tmp_path: Path) -> None:
    rows = [cell(0, "OTHER", "x"), *three(0, 2.0, 2.1, 50), *three(1, "1,500.0", 2.1, 51)]
    (problem,) = problems_of(
        tmp_path, [row if "1,5" not in row else row.replace("1,500.0", '"1,500.0"') for row in rows]
    )
    assert problem.where == "log.csv, line 6"


def test_rows_without_a_tag_and_footers_are_left_out(tmp_path: Path) -> None:
    rows = [*three(0, 2.0, 2.1, 50), cell(0, "", 7), "time,tag,value", *three(1, 2.2, 2.1, 51), "End of export,,"]
    log = read_rows(tmp_path, rows)
    assert {f.kind: f.count for f in log.findings} == {"untagged-row": 1, "repeated-header": 1, "footer": 1}
    np.testing.assert_array_equal(log.channels[TAGS["level"]], [2.0, 2.2])


def test_a_tag_whose_rows_are_all_blank_is_told(tmp_path: Path) -> None:
    (problem,) = problems_of(tmp_path, [cell(0, TAGS["level"], 2.0), cell(0, TAGS["target"], 2.1), f",{TAGS['gate']},"])
    assert TAGS["gate"] in problem.what


def test_texts_of_one_tag_are_its_own(tmp_path: Path) -> None:
    rows = [*three(0, 2.0, 2.1, 50), *three(1, "Bad", 2.1, 51), *three(2, 2.3, 2.1, 51)]
    log = read_rows(tmp_path, rows)
    assert list(log.texts) == [TAGS["level"]]
    assert log.texts[TAGS["level"]].tolist() == [None, "Bad", None]
    (found,) = log.findings
    assert (found.kind, found.signal, found.count) == ("text-state", TAGS["level"], 1)
