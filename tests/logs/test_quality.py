"""Codes of quality: what they mean, and what becomes of the values beside them."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet
import pytest
from test_long_layout import TAGS, long_loop, three
from written_logs import read_text

from auditor.errors import LogError
from auditor.logs.align import align
from auditor.logs.log import Log
from auditor.logs.quality import Grade, grades, read_codes
from auditor.logs.reader import read_log
from auditor.loop import LogSource

LEVEL, TARGET, GATE = TAGS.values()
GOOD, UNCERTAIN, STALE, BAD = Grade


def meaning(codes: Iterable[str], **stated: Any) -> dict[str, Grade]:
    return grades(codes, LogSource(paths=("log.csv",), folder=Path(), **stated))


@pytest.mark.parametrize(
    "codes",
    [
        # OPC UA: bits 31:30 are 00 good, 01 uncertain, 10 and 11 bad; as numbers, as hexadecimal, with a sign bit.
        {"0": GOOD, "1073741824": UNCERTAIN, "2147483648": BAD, "3221225472": BAD},
        {"0x00000000": GOOD, "0x40000000": UNCERTAIN, "0x80310000": BAD, "0xC0000000": BAD},
        {"0": GOOD, "-2147483648": BAD, "-1073741824": BAD},
        # The lower half does not change the meaning.
        {"1024": GOOD, "0": GOOD, "0x40920480": UNCERTAIN, "0x800000c0": BAD},
        # Two uncertain words say that the value is the last usable one.
        {"0": GOOD, "0x408F0000": STALE, "0x40900000": STALE, "0x40910000": UNCERTAIN},
        # One byte QQSSSSLL: good from 192, uncertain 64…191, bad below.
        {"192": GOOD, "216": GOOD, "195": GOOD, "255": GOOD, "64": UNCERTAIN, "84": UNCERTAIN, "128": UNCERTAIN},
        {"192": GOOD, "0": BAD, "4": BAD, "24": BAD, "28": BAD, "63": BAD},
        # Last known and last usable, with any limit bits.
        {"192": GOOD, **{str(byte): STALE for byte in (20, 21, 22, 23, 68, 69, 70, 71)}, "19": BAD, "72": UNCERTAIN},
        # A byte of the vendor above the quality.
        {"192": GOOD, "448": GOOD, "276": STALE},
        # NAMUR NE 107; the letters only name faults.
        {"": GOOD, "F": BAD, "C": BAD, "S": UNCERTAIN, "M": UNCERTAIN},
        {"Good": GOOD, "BAD": BAD, "uncertain": UNCERTAIN, "Stale": STALE, "": UNCERTAIN},
        {"GoodLocalOverride": GOOD, "Bad, no communication": BAD, "Uncertain_LastUsableValue": STALE, "OK": GOOD},
        # Zero throughout is the good status word.
        {"0": GOOD},
    ],
)
def test_codes_of_open_standards(codes: dict[str, Grade]) -> None:
    assert meaning(codes) == codes


@pytest.mark.parametrize(
    ("stated", "codes"),
    [
        ({"good": (1,)}, {"1": GOOD, "0": BAD, "192": BAD, "Good": BAD}),
        ({"good": ("A", 192), "stale": ("R",)}, {"a": GOOD, "192": GOOD, "r": STALE, "0": BAD, "": BAD}),
        ({"good": ("0x0",)}, {"0": GOOD, "1": BAD}),
        ({"stale": ("held",)}, {"Good": GOOD, "Held": STALE, "Bad": BAD}),
        ({"stale": (216, "0x54")}, {"192": GOOD, "216": STALE, "84": STALE, "64": UNCERTAIN}),
    ],
)
def test_stated_codes_come_first(stated: dict[str, Any], codes: dict[str, Grade]) -> None:
    assert meaning(codes, **stated) == codes


@pytest.mark.parametrize("codes", [("1", "2"), ("0", "64"), ("Good", "Questionable"), ("F", "X"), ("1.5",), ("-5e9",)])
def test_codes_that_nothing_explains_are_asked_for(codes: tuple[str, ...]) -> None:
    with pytest.raises(LogError) as raised:
        meaning(codes)
    (problem,) = raised.value.problems
    assert f'"{codes[-1]}"' in problem.found
    assert "good = [...]" in problem.do


@pytest.mark.parametrize(
    ("values", "words"),
    [
        ([192, 0, 192], ["192", "0", "192"]),
        ([192.0, None, 192.0], ["192", "", "192"]),
        (["Bad ", None, "Bad"], ["Bad", "", "Bad"]),
    ],
)
def test_codes_are_read_from_any_column(values: list[Any], words: list[str]) -> None:
    cells = pa.array(values)
    codes, met = read_codes(pa.chunked_array([cells[:1], cells[1:]]))
    assert [met[code] for code in codes] == words


def test_a_dictionary_may_hold_texts_that_no_row_has() -> None:
    coded = pa.DictionaryArray.from_arrays(pa.array([2, None, 1, 2]), pa.array(["Old", "Good", "Bad ", "Bad"]))
    codes, met = read_codes(pa.chunked_array([coded, coded.slice(2, 1)]))
    assert [met[code] for code in codes] == ["Bad", "", "Good", "Bad", "Good"]
    assert sorted(met) == ["", "Bad", "Good"]


def read_rows(folder: Path, rows: Iterable[str], **more: Any) -> Log:
    (folder / "log.csv").write_text("time,tag,value,quality\n" + "\n".join(rows) + "\n")
    return read_log(long_loop(folder, quality="quality", **more))


def rows_of(minute: int, level: object, code: object) -> list[str]:
    return [f"{row},{code if n == 0 else 192}" for n, row in enumerate(three(minute, level, 2.0, 50))]


def test_bad_and_stale_values_are_none_and_uncertain_ones_are_used(tmp_path: Path) -> None:
    codes = (192, 20, 68, 0, 64, 192, 20)
    rows = [row for n, code in enumerate(codes) for row in rows_of(n, 2.0 + n, code)]
    log = read_rows(tmp_path, rows)
    nan = np.nan
    np.testing.assert_array_equal(log.channels[LEVEL], [2.0, nan, nan, nan, 6.0, 7.0, nan])
    np.testing.assert_array_equal(log.channels[GATE], [50.0] * 7)
    assert log.texts[LEVEL].tolist() == [None, "20", "68", "0", None, None, "20"]
    told = {f.kind: (f.count, f.signal, f.detail.partition("code: ")[2]) for f in log.findings}
    assert told == {
        "bad-quality": (1, LEVEL, '1 × "0"'),
        "stale-quality": (3, LEVEL, '2 × "20", 1 × "68"'),
        "uncertain-quality": (1, LEVEL, '1 × "64"'),
    }
    (stale,) = (f for f in log.findings if f.kind == "stale-quality")
    assert (stale.start, stale.end) == (int(log.time[1]), int(log.time[6]))


def test_a_text_of_bad_quality_is_no_state_of_its_own(tmp_path: Path) -> None:
    rows = [*rows_of(0, 2.0, 192), *[row for n in (1, 2, 3) for row in rows_of(n, "Bad Input", 0)]]
    log = read_rows(tmp_path, rows)
    assert [f.kind for f in log.findings] == ["bad-quality"]
    np.testing.assert_array_equal(log.channels[LEVEL], [2.0, np.nan, np.nan, np.nan])


def test_the_mode_of_bad_quality_is_no_known_mode(tmp_path: Path) -> None:
    rows = [row for n in range(4) for row in rows_of(n, 2.0, 192)]
    rows += [f"2025-03-01T00:0{n}:00Z,MODE,AUTO,{code}" for n, code in enumerate((192, 20, 0, 64))]
    log = read_rows(tmp_path, rows, mode="MODE")
    assert log.texts["MODE"].tolist() == ["AUTO", "", "bad quality", "AUTO"]


def test_codes_of_all_files_are_understood_together(tmp_path: Path) -> None:
    quality = {"a": [0, 0, 0], "b": [192, 192, 192]}
    for n, (name, codes) in enumerate(quality.items()):
        table = {"time": pa.array([n * 60] * 3, pa.timestamp("s", "UTC")), "tag": list(TAGS.values())}
        table |= {"value": [2.0, 2.0, 50.0], "quality": codes}
        pa.parquet.write_table(pa.table(table), tmp_path / f"{name}.parquet")
    loop = long_loop(tmp_path, quality="quality")
    loop = replace(loop, log=replace(loop.log, paths=("*.parquet",)))
    np.testing.assert_array_equal(read_log(loop).channels[LEVEL], [np.nan, 2.0])


def test_one_quality_for_all_columns_of_a_row(tmp_path: Path) -> None:
    text = "time,level,gate,quality\n2025-01-01T00:00:00Z,1,5,Good\n2025-01-01T00:01:00Z,2,6,Bad\n"
    log = read_text(tmp_path, text, quality="quality")
    np.testing.assert_array_equal(log.channels["level"], [1, np.nan])
    np.testing.assert_array_equal(log.channels["gate"], [5, np.nan])
    (found,) = log.findings
    assert (found.kind, found.count, found.signal) == ("bad-quality", 1, "")


def test_a_held_value_ends_where_quality_turns_bad(tmp_path: Path) -> None:
    rows = [row for n in range(60) for row in (rows_of(n, 2.0 + n % 7, 192) if n % 4 == 0 else rows_of(n, 9, 192)[1:])]
    rows += rows_of(21, 9.0, 20)[:1]
    loop = long_loop(tmp_path, measurement={"stored": "on-change"}, quality="quality")
    record = align(read_rows(tmp_path, rows), loop)
    assert np.flatnonzero(~record.valid).tolist() == [21, 22, 23]
