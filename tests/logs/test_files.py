"""Which files a log is made of, and what is no log."""

from __future__ import annotations

import gzip
import hashlib
import os
import sqlite3
import zipfile
from pathlib import Path

import pytest
from written_logs import pool_loop, problems_of, read

from auditor.errors import LogError
from auditor.logs.files import describe_inputs, kind, resolve

TEXT = "time,level,gate\n2025-01-01T00:00:00Z,1,2\n"


def names(folder: Path, *entries: str) -> list[str]:
    return [path.relative_to(folder).as_posix() for path in resolve(pool_loop(folder, *entries).log)]


@pytest.fixture
def store(tmp_path: Path) -> Path:
    for name in ("a.csv", "b.csv", "note.md", "deep/c.csv", "deep/d.csv.gz", "deep/.hidden.csv", "[x].csv"):
        path = tmp_path / name
        path.parent.mkdir(exist_ok=True)
        path.write_text(TEXT)
    return tmp_path


@pytest.mark.parametrize(
    ("entries", "expected"),
    [
        (["a.csv"], ["a.csv"]),
        (["b.csv", "a.csv"], ["b.csv", "a.csv"]),
        (["?.csv"], ["a.csv", "b.csv"]),
        (["**/*.csv"], ["[x].csv", "a.csv", "b.csv", "deep/c.csv"]),
        (["deep"], ["deep/c.csv", "deep/d.csv.gz"]),
        (["a.csv", "*.csv"], ["a.csv", "[x].csv", "b.csv"]),
        (["[x].csv"], ["[x].csv"]),  # a name, although it could be a pattern
    ],
)
def test_entries_are_files_patterns_and_folders(store: Path, entries: list[str], expected: list[str]) -> None:
    assert names(store, *entries) == expected


def test_paths_start_from_the_loop_files_folder_or_from_the_root(store: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir("/")
    assert names(store, "a.csv") == ["a.csv"]
    assert names(store, str(store / "deep" / "c.csv")) == ["deep/c.csv"]
    assert names(store, (store / "a.csv").as_uri()) == ["a.csv"]


def test_everything_that_names_nothing_is_said_at_once(store: Path) -> None:
    with pytest.raises(LogError) as raised:
        resolve(pool_loop(store, "A.csv", "a.csv", "*.parquet", "nowhere/x.csv", "empty", "s3://bucket/x.csv").log)
    (store / "empty").mkdir()
    problems = {problem.where: problem for problem in raised.value.problems}
    assert list(problems) == ["A.csv", "*.parquet", "nowhere/x.csv", "empty", "s3://bucket/x.csv"]
    assert "a.csv" in problems["A.csv"].do
    assert "matches no file" in problems["*.parquet"].what
    assert "neither does its folder" in problems["nowhere/x.csv"].what
    with pytest.raises(LogError, match="folder holds no log"):
        resolve(pool_loop(store, "empty").log)


def test_inputs_are_known_by_relative_name_size_and_hash(store: Path) -> None:
    inputs = describe_inputs([store / "deep" / "c.csv", store / "a.csv"], store / "deep")
    assert [item.path for item in inputs] == ["c.csv", (store / "a.csv").as_posix()]
    assert {item.sha256 for item in inputs} == {hashlib.sha256(TEXT.encode()).hexdigest()}
    assert {item.bytes for item in inputs} == {len(TEXT)}


def test_the_content_decides_not_the_name(tmp_path: Path) -> None:
    (tmp_path / "a.dat").write_text(TEXT)
    (tmp_path / "b.xls").write_bytes(gzip.compress(TEXT.encode()))
    assert kind(tmp_path / "a.dat", "a.dat") == "csv"
    assert read(tmp_path, "b.xls").rows == 1


def zipped(path: Path, members: dict[str, str]) -> None:
    with zipfile.ZipFile(path, "w") as archive:
        for name, content in members.items():
            archive.writestr(name, content)


def write_stranger(path: Path, what: str) -> None:
    if what == "xlsx":
        zipped(path, {"[Content_Types].xml": "", "xl/workbook.xml": ""})
    elif what == "ods":
        zipped(path, {"mimetype": "application/vnd.oasis.opendocument.spreadsheet"})
    elif what == "zip":
        zipped(path, {"log.bin": "1", "log.idx": "2"})
    elif what == "sqlite":
        with sqlite3.connect(path) as database:
            database.execute("create table log (time text)")
        database.close()
    else:
        path.write_bytes(STRANGE_BYTES[what])


STRANGE_BYTES = {
    "xls": b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(500),
    "html": b"\n<html><table><tr><td>time</td></tr></table>",
    "access": b"\x00\x01\x00\x00Standard ACE DB\x00" + bytes(100),
    "hdf": b"\x89HDF\r\n\x1a\n" + bytes(100),
    "binary": bytes(range(256)) * 8,
    "zeros": bytes(4096),
    "binary in gzip": gzip.compress(bytes(range(256)) * 8),
}


@pytest.mark.parametrize(
    ("what", "said"),
    [
        ("xlsx", ".xlsx"),
        ("ods", ".ods"),
        ("xls", ".xls"),
        ("zip", "zip archive"),
        ("sqlite", "SQLite"),
        ("access", "desktop database"),
        ("html", "web page"),
        ("hdf", "HDF5"),
        ("binary", "binary file"),
        ("zeros", "binary file"),
        ("binary in gzip", "binary file"),
    ],
)
def test_what_is_no_log_is_named_with_the_way_out(tmp_path: Path, what: str, said: str) -> None:
    write_stranger(tmp_path / "log.csv", what)
    (problem,) = problems_of(tmp_path)
    assert said in problem.what
    assert problem.where == "log.csv"
    if what in ("xlsx", "ods", "xls"):
        assert "save the sheet as CSV" in problem.do


def test_a_text_called_parquet_is_refused(tmp_path: Path) -> None:
    (tmp_path / "log.parquet").write_text(TEXT)
    (problem,) = problems_of(tmp_path, "log.parquet")
    assert "not a Parquet file" in problem.what


def test_every_file_that_cannot_be_used_is_said(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("")
    (tmp_path / "b.csv").write_bytes(bytes(100))
    (tmp_path / "c.csv").write_text("time,level\n1,2\n")
    (tmp_path / "d.csv").write_text(TEXT)
    assert [problem.where for problem in problems_of(tmp_path, "*.csv")] == ["a.csv", "b.csv", "c.csv"]


@pytest.mark.skipif(not hasattr(os, "geteuid") or os.geteuid() == 0, reason="root may open everything")
def test_a_file_without_rights_is_refused(tmp_path: Path) -> None:
    (tmp_path / "log.csv").write_text(TEXT)
    (tmp_path / "log.csv").chmod(0)
    (problem,) = problems_of(tmp_path)
    assert "cannot be opened" in problem.what


def test_only_logs_with_a_close_name_are_offered(tmp_path: Path) -> None:
    for name in ("x.csv", "gone.png", "pool-7.csv"):
        (tmp_path / name).write_text("time,level,gate\n")
    (problem,) = problems_of(tmp_path, "gone.csv")
    assert "did you mean" not in problem.do
    assert "png" not in problem.found
    assert problems_of(tmp_path, "pool7.csv")[0].do == 'did you mean "pool-7.csv"?'
