"""Text logs: the same rows in many dresses, what is dropped, what is refused."""

from __future__ import annotations

import csv
import gzip
import io
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from written_logs import SECOND, START, problem_of_text, problems_of, read, read_text

from auditor.logs.log import Log

ROWS = [
    ("2025-01-01T00:00:00Z", "2.01", "50", "AUTO"),
    ("2025-01-01T00:01:00Z", "-2.5", "50.25", "AUTO"),
    ("2025-01-01T00:02:00Z", "", "1e1", "MAN"),
    ("2025-01-01T00:03:00Z", "+1.75", "0", ""),
]
HEADER = ("time", "level", "gate", "mode")
LEVEL = [2.01, -2.5, np.nan, 1.75]
GATE = [50.0, 50.25, 10.0, 0.0]


def written(delimiter: str = ",", decimal: str = ".", end: str = "\n", quoted: bool = False, trail: str = "") -> str:
    cells = [[cell.replace(".", decimal) if k in (1, 2) else cell for k, cell in enumerate(row)] for row in ROWS]
    quote = '"' if quoted else ""
    lines = [delimiter.join(f"{quote}{cell}{quote}" for cell in row) + trail for row in [list(HEADER), *cells]]
    return end.join(lines) + end


def check(log: Log) -> None:
    """The rows above, exactly."""
    assert list(log.time) == [START + k * 60 * SECOND for k in range(4)]
    np.testing.assert_array_equal(log.channels["level"], LEVEL)
    np.testing.assert_array_equal(log.channels["gate"], GATE)
    assert list(log.texts["mode"]) == ["AUTO", "AUTO", "MAN", ""]
    assert log.rows == 4
    assert log.zone == "UTC"


DRESSES: dict[str, bytes] = {
    "plain": written().encode(),
    "semicolon": written(";").encode(),
    "tab": written("\t").encode(),
    "bar": written("|").encode(),
    "decimal comma": written(";", ",").encode(),
    "decimal comma in quotes": written(",", ",", quoted=True).encode(),
    "carriage returns": written(end="\r\n").encode(),
    "old line ends": written(end="\r").encode(),
    "no last line end": written().rstrip("\n").encode(),
    "quoted": written(quoted=True).encode(),
    "trailing delimiters": written(";", ",", trail=";").encode(),
    "trailing delimiters below the header only": written(";", trail=";").replace("mode;", "mode", 1).encode(),
    "blanks around cells": written(" ; ".strip()).replace(";", " ; ").encode(),
    "utf-8 with mark": "\ufeff".encode() + written().encode(),
    "utf-16 with mark": written(";").encode("utf-16"),
    "utf-16 little end": written(";").encode("utf-16-le"),
    "utf-16 big end": written(";").encode("utf-16-be"),
    "cp1252 preamble": "Höhe über Grund\n".encode("cp1252") + written().encode(),
    "preamble": b"Station: north weir\nExport;of;all\n\n# 3 lines\n" + written(";").encode(),
    "blank lines among rows": written().replace("Z,2.01", "Z,2.01").replace("AUTO\n", "AUTO\n\n").encode(),
    "gzip": gzip.compress(written().encode()),
    "gzip in two pieces": gzip.compress(written()[:70].encode()) + gzip.compress(written()[70:].encode()),
    "more columns in another order": "\n".join(
        f"{row[3]},7,{row[2]},x{k},{row[1]},{row[0]}" for k, row in enumerate([HEADER, *ROWS])
    ).encode(),
}


@pytest.mark.parametrize("dress", list(DRESSES))
def test_every_dress_is_read_alike(tmp_path: Path, dress: str) -> None:
    (tmp_path / "log.csv").write_bytes(DRESSES[dress])
    log = read(tmp_path, mode="mode")
    check(log)
    assert log.findings == ()


def test_a_line_with_units_below_the_header_is_skipped_and_said(tmp_path: Path) -> None:
    first_line, rest = written(";").split("\n", 1)
    log = read_text(tmp_path, f"{first_line}\n;m;%;\n\n[utc];Höhe;Weg;\n{rest}", mode="mode")
    check(log)
    (finding,) = log.findings
    assert (finding.kind, finding.count) == ("lines-below-header", 2)
    assert ";m;%;" in finding.detail


def test_a_name_over_two_lines_is_read(tmp_path: Path) -> None:
    log = read_text(tmp_path, 'time,"other\n(m)",level,gate\n2025-01-01T00:00:00Z,1,2,3\n')
    assert log.channels["level"][0] == 2.0


def test_what_is_stated_is_not_looked_for(tmp_path: Path) -> None:
    # The line that would win by looking stands above the one the loop file says is the header.
    text = "time!level!gate!mode\nnot this\n" + written("!", ",") + "\n"
    check(read_text(tmp_path, text, mode="mode", delimiter="!", decimal=",", encoding="latin-1", skip_rows=2))


def test_a_stated_encoding_is_followed_in_the_mode(tmp_path: Path) -> None:
    raw = "time,level,gate,mode\n2025-01-01T00:00:00Z,1,2,Авто\n".encode("cp1251")
    assert read_text(tmp_path, raw, mode="mode", encoding="cp1251").texts["mode"][0] == "Авто"


@pytest.mark.parametrize("encoding", ["utf-8", "UTF8", "utf-8-sig"])
def test_a_mark_is_no_part_of_the_first_name(tmp_path: Path, encoding: str) -> None:
    check(read_text(tmp_path, "\ufeff" + written(), mode="mode", encoding=encoding))


def test_a_stated_encoding_that_does_not_fit_is_refused(tmp_path: Path) -> None:
    assert "encoding" in problem_of_text(tmp_path, written(), mode="mode", encoding="utf-16").do


def test_a_wrong_encoding_is_told_with_its_line_and_one_that_fits(tmp_path: Path) -> None:
    raw = "time,level,gate,mode\n2025-01-01T00:00:00Z,1,2,Störung\n".encode("cp1252")
    problem = problem_of_text(tmp_path, raw, mode="mode", encoding="utf-8")
    assert problem.where == "log.csv, line 2"
    assert "0xf6" in problem.found
    assert "utf-8" in problem.expected
    assert 'encoding = "cp1252"' in problem.do


def test_a_letter_far_down_may_show_the_encoding(tmp_path: Path) -> None:
    rows = "".join(f"2025-01-01T00:{k // 60:02}:{k % 60:02}Z,1,2,AUTO\n" for k in range(3000))
    raw = ("time,level,gate,mode\n" + rows).encode() + "2025-01-02T00:00:00Z,1,2,Störung\n".encode("cp1252")
    assert len(raw) > 64 * 1024  # beyond what is looked at
    assert read_text(tmp_path, raw, mode="mode").texts["mode"][-1] == "Störung"


def test_a_column_without_a_name_may_hold_the_time(tmp_path: Path) -> None:
    text = ",level,gate\n2025-01-01T00:00:00Z,1,2\n"
    assert read_text(tmp_path, text, time="").time[0] == START
    assert 'time = ""' in problem_of_text(tmp_path, text).do


def test_files_follow_each_other_by_time_whatever_their_column_order(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("time,level,gate\n2025-01-01T00:01:00Z,3,4\n")
    (tmp_path / "b.csv").write_text("gate;time;level\n2,0;2025-01-01T00:00:00Z;1,5\n")
    log = read(tmp_path, "a.csv", "b.csv")
    assert list(log.time) == [START, START + 60 * SECOND]
    assert list(log.channels["level"]) == [1.5, 3.0]
    assert list(log.channels["gate"]) == [2.0, 4.0]
    assert [file.path for file in log.inputs] == ["a.csv", "b.csv"]


def test_recorded_order_and_duplicates_are_kept(tmp_path: Path) -> None:
    stamps = ["2025-01-01T00:02:00Z", "2025-01-01T00:00:00Z", "2025-01-01T00:00:00Z"]
    log = read_text(tmp_path, "time,level,gate\n" + "".join(f"{s},{k},0\n" for k, s in enumerate(stamps)))
    assert list(log.time - START) == [120 * SECOND, 0, 0]
    assert list(log.channels["level"]) == [0.0, 1.0, 2.0]


def test_arrays_are_read_only(tmp_path: Path) -> None:
    log = read_text(tmp_path, written(), mode="mode")
    for array in (log.time, *log.channels.values(), *log.texts.values()):
        assert not array.flags.writeable


# --- Cells that are no numbers


def test_text_states_are_kept_and_counted(tmp_path: Path) -> None:
    cells = ["1", "Bad", "2", "Inp OutRange", "Bad", "", "NaN", "null", "inf", "3", "4", "5", " 6 "]
    rows = "".join(f"2025-01-01T00:{k:02}:00Z,{cell},0\n" for k, cell in enumerate(cells))
    log = read_text(tmp_path, "time,level,gate\n" + rows)
    nan = np.nan
    np.testing.assert_array_equal(log.channels["level"], [1, nan, 2, nan, nan, nan, nan, nan, nan, 3, 4, 5, 6])
    assert list(log.texts) == ["level"]
    assert [text for text in log.texts["level"] if text is not None] == ["Bad", "Inp OutRange", "Bad", "inf"]
    (finding,) = log.findings
    assert (finding.kind, finding.signal, finding.count) == ("text-state", "level", 4)
    assert finding.detail == '2 × "Bad", 1 × "Inp OutRange", 1 × "inf"'
    assert (finding.start, finding.end) == (START + 60 * SECOND, START + 8 * 60 * SECOND)


def test_an_infinite_value_alone_is_kept_as_text(tmp_path: Path) -> None:
    log = read_text(tmp_path, "time,level,gate\n2025-01-01T00:00:00Z,1,2\n2025-01-01T00:01:00Z,-inf,2\n")
    assert np.isnan(log.channels["level"][1])
    assert list(log.texts["level"]) == [None, "-inf"]


def test_a_column_may_be_number_and_mode(tmp_path: Path) -> None:
    text = "time,level,gate\n2025-01-01T00:00:00Z,1,2\n2025-01-01T00:01:00Z,1,Bad\n2025-01-01T00:02:00Z,1,3\n"
    log = read_text(tmp_path, text, mode="gate")
    np.testing.assert_array_equal(log.channels["gate"], [2.0, np.nan, 3.0])
    assert list(log.texts["gate"]) == ["2", "Bad", "3"]


def test_a_column_that_is_mostly_text_is_refused(tmp_path: Path) -> None:
    rows = "".join(f"2025-01-01T00:0{k}:00Z,{cell},0\n" for k, cell in enumerate(["1", "1.5 m", "1.6 m", "1.7 m"]))
    problem = problem_of_text(tmp_path, "time,level,gate\n" + rows)
    assert "3 of 4" in problem.what
    assert "line 3" in problem.where
    assert "1.5 m" in problem.found


@pytest.mark.parametrize(
    ("delimiter", "cells", "decimal"),
    [
        (";", ["1.5", "1,234.5", "2.5"], None),  # digit groups
        (";", ["1,5", "1.234,5", "2,5"], None),
        (";", ["1,5", "1.234", "2,5"], None),  # a group of digits that would pass for a number
        (";", ["1.5", "1 234.5", "2.5"], None),
        (";", ["1,5", "2,5", "3,5"], "."),  # the wrong decimal sign stated
    ],
)
def test_numbers_written_in_another_way_are_refused_never_dropped(
    tmp_path: Path, delimiter: str, cells: list[str], decimal: str | None
) -> None:
    rows = "".join(delimiter.join([f"2025-01-01T00:0{k}:00Z", c, "0"]) + "\n" for k, c in enumerate(cells))
    text = delimiter.join(["time", "level", "gate"]) + "\n" + rows
    problem = problem_of_text(tmp_path, text, decimal=decimal)
    assert 'Column "level"' in problem.what
    assert "decimal" in problem.do


finite = st.floats(allow_nan=False, allow_infinity=False)


@given(st.lists(st.tuples(finite, finite), min_size=1, max_size=20), st.sampled_from(",;\t|"), st.booleans())
@settings(max_examples=60, deadline=None)
def test_numbers_come_back_bit_for_bit(
    tmp_path_factory: pytest.TempPathFactory, rows: list[tuple[float, float]], delimiter: str, comma: bool
) -> None:
    out = io.StringIO()
    writer = csv.writer(out, delimiter=delimiter)
    writer.writerow(["time", "level", "gate"])
    decimal = "," if comma else "."
    for k, values in enumerate(rows):
        writer.writerow([f"2025-01-01T00:00:{k:02}Z", *(repr(value).replace(".", decimal) for value in values)])
    log = read_text(tmp_path_factory.getbasetemp(), out.getvalue(), decimal=decimal)
    assert log.channels["level"].tolist() == [level for level, _ in rows]
    assert log.channels["gate"].tolist() == [gate for _, gate in rows]


# --- Lines that are no rows


@pytest.mark.parametrize("footer", ["End of export\n", "rows: 4\n-- bye --\n", "Total,,,\n", "Total,4,200,\n\n"])
def test_a_footer_is_skipped_and_said(tmp_path: Path, footer: str) -> None:
    log = read_text(tmp_path, written() + footer, mode="mode")
    check(log)
    assert [finding.kind for finding in log.findings] == ["footer"]
    assert footer.split("\n")[0].split(",")[0] in log.findings[0].detail


def test_a_broken_line_among_the_rows_is_skipped_and_said(tmp_path: Path) -> None:
    lines = written().split("\n")
    log = read_text(tmp_path, "\n".join([*lines[:3], "2025-01-01T00:01:3", *lines[3:]]), mode="mode")
    check(log)
    (finding,) = log.findings
    assert (finding.kind, finding.count) == ("broken-row", 1)
    assert "line 4" in finding.detail


def test_blank_rows_and_repeated_headers_are_skipped_and_said(tmp_path: Path) -> None:
    header, rows = written(";").split("\n", 1)
    log = read_text(tmp_path, f"{header}\n;;;\n{rows}{header}\n;;;\n;;;\n", mode="mode")
    check(log)
    assert {finding.kind: finding.count for finding in log.findings} == {"blank-row": 3, "repeated-header": 1}


def test_lines_are_counted_past_what_was_skipped(tmp_path: Path) -> None:
    text = "preamble\n\n" + written() + "\n2025-01-01T00:03\n2025-01-01T00:04:00Z,1.0,x1,AUTO\n"
    text += "soon,1.0,1,AUTO\n2025-01-01T00:05:00Z,1.0,1,AUTO\n"
    problem = problem_of_text(tmp_path, text, mode="mode")
    assert text.split("\n")[10] == "soon,1.0,1,AUTO"
    assert "line 11" in problem.where


def test_a_row_with_values_and_no_time_is_refused(tmp_path: Path) -> None:
    text = "time,level,gate\n2025-01-01T00:00:00Z,1,2\n,1,2\n2025-01-01T00:02:00Z,1,2\n"
    problem = problem_of_text(tmp_path, text)
    assert "line 3" in problem.where
    assert problem.found == "an empty cell"


def test_lines_of_many_lengths_are_refused(tmp_path: Path) -> None:
    rows = "".join(f"2025-01-01T00:00:{k:02}Z,1,2{',9' * (k % 3)}\n" for k in range(60))
    problem = problem_of_text(tmp_path, "time,level,gate\n" + rows)
    assert "40 of 60" in problem.what


# --- What cannot be used


def test_a_stated_key_that_hides_every_column_is_blamed_first(tmp_path: Path) -> None:
    text = "export of a pool\n" + written(";", ",")
    problem = problem_of_text(tmp_path, text, mode="mode", skip_rows=0)
    assert "skip_rows = 0" in problem.what
    assert '"level"' in problem.expected
    problem = problem_of_text(tmp_path, text, mode="mode", delimiter="|")
    assert 'delimiter = "|"' in problem.what
    assert "skip_rows, delimiter" in problem_of_text(tmp_path, text, mode="mode", delimiter="|", skip_rows=0).where
    # A column that is missing all the same is named as well.
    (tmp_path / "log.csv").write_text(text)
    first, second = problems_of(tmp_path, mode="state", skip_rows=0)
    assert "skip_rows = 0" in first.what
    assert '"state"' in second.what


def test_every_missing_column_is_named_at_once(tmp_path: Path) -> None:
    (tmp_path / "log.csv").write_text("Time,levle,position,x\n2025-01-01T00:00:00Z,1,2,3\n")
    problems = problems_of(tmp_path, mode="mode")
    assert [problem.what.split('"')[1] for problem in problems] == ["time", "level", "gate", "mode"]
    assert 'did you mean "Time"?' in problems[0].do
    assert 'did you mean "levle"?' in problems[1].do
    assert '"position"' in problems[2].found
    assert "signals.actuator" in problems[2].expected


def test_a_column_missing_in_many_files_is_said_once(tmp_path: Path) -> None:
    for name in ("a", "b", "c"):
        (tmp_path / f"{name}.csv").write_text("time,level\n2025-01-01T00:00:00Z,1\n")
    (problem,) = problems_of(tmp_path, "*.csv")
    assert problem.where == "a.csv and 2 more"


@pytest.mark.parametrize(
    ("text", "what"),
    [
        ("time,level,gate\n", "no rows"),
        ("time,level,gate", "no rows"),
        ("time;level;gate\n;m;%\n", "no rows"),
        ("", "empty"),
        ("\n \n\n", "empty"),
        ("time,level,gate,level\n2025-01-01T00:00:00Z,1,2,3\n", "2 columns are called"),
        ("time,level,gate\n2025-01-01T00:00:00Z,1,5,2,5\n", "The rows have 5 cells"),
        ("time,gate,level\n2025-01-01T00:00:00Z,1\n", 'column "level" would be number 3'),
    ],
)
def test_a_log_without_usable_rows_is_refused(tmp_path: Path, text: str, what: str) -> None:
    problem = problem_of_text(tmp_path, text)
    assert what in problem.what
    assert "log.csv" in problem.where
    assert problem.do


@pytest.mark.parametrize(
    ("stated", "where"),
    [
        ({"encoding": "utf-99"}, "[log] encoding"),
        ({"encoding": "base64"}, "[log] encoding"),
        ({"delimiter": "::"}, "[log] delimiter"),
        ({"decimal": "'"}, "[log] decimal"),
        ({"layout": "tall"}, "[log] layout"),
    ],
)
def test_a_statement_that_is_none_is_refused(tmp_path: Path, stated: dict[str, str], where: str) -> None:
    assert problem_of_text(tmp_path, written(), **stated).where == where


def test_letters_that_do_not_decode_are_refused(tmp_path: Path) -> None:
    raw = b"time,level,gate,mode\n2025-01-01T00:00:00Z,1,2,AUTO\xff\n"
    assert "encoding" in problem_of_text(tmp_path, raw, encoding="utf-8", mode="mode").do


def test_a_damaged_gzip_file_is_refused(tmp_path: Path) -> None:
    packed = gzip.compress(written().encode() * 3000)
    assert "log.csv" in problem_of_text(tmp_path, packed[: len(packed) // 2]).where
