"""Packed logs: gzip, Zstandard and zip archives, and what must not be unpacked."""

from __future__ import annotations

import gzip
import io
import zipfile
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet
import pytest
from test_long_layout import TAGS, long_loop, three
from written_logs import problems_of, read

from auditor.logs import packed
from auditor.logs.packed import Member, head, members
from auditor.logs.reader import read_log

HEADER = "time,level,gate\n"


def text_of(first: int, rows: int, header: str = HEADER) -> str:
    return header + "".join(f"2025-01-01T00:{first + k:02}:00Z,{first + k},5\n" for k in range(rows))


def zstandard(data: bytes) -> bytes:
    """Pack in one frame, as the usual program does."""
    sink = pa.BufferOutputStream()
    with pa.CompressedOutputStream(sink, "zstd") as file:
        file.write(data)
    return bytes(sink.getvalue().to_pybytes())


def zipped(path: Path, inside: dict[str, str | bytes]) -> None:
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in inside.items():
            archive.writestr(name, content)


def parquet_of(first: int) -> bytes:
    sink = io.BytesIO()
    time = pa.array([(first + k) * 60 for k in range(2)], pa.timestamp("s", "UTC"))
    pa.parquet.write_table(pa.table({"time": time, "level": [float(first), first + 1.0], "gate": [5.0, 5.0]}), sink)
    return sink.getvalue()


@pytest.mark.parametrize("pack", [zstandard, gzip.compress])
@pytest.mark.parametrize("name", ["log.csv", "log.csv.zst", "odd name"])
def test_a_packed_text_log(tmp_path: Path, pack, name: str) -> None:  # type: ignore[no-untyped-def]
    (tmp_path / name).write_bytes(pack(text_of(0, 60).encode()))
    log = read(tmp_path, name)
    np.testing.assert_array_equal(log.channels["level"], np.arange(60.0))
    assert [item.path for item in log.inputs] == [name]


def test_a_packed_log_in_another_encoding(tmp_path: Path) -> None:
    (tmp_path / "log.csv").write_bytes(zstandard(text_of(0, 60).encode("utf-16")))
    np.testing.assert_array_equal(read(tmp_path).channels["level"], np.arange(60.0))


@pytest.mark.parametrize(
    "inside",
    [
        {"pool.csv": text_of(0, 4)},
        {"export": text_of(0, 4)},
        {"b/2.csv": text_of(2, 2), "b/1.csv": text_of(0, 2), "readme.md": "by hand"},
        {"2.txt": text_of(0, 2), "1.txt": text_of(2, 2)},
        {"1.csv": text_of(0, 4), "__MACOSX/._1.csv": "x", ".hidden.csv": "x"},
        {"1.parquet": parquet_of(0), "2.parquet": parquet_of(2), "more.csv": "x"},
    ],
)
def test_the_logs_in_an_archive_are_its_files(tmp_path: Path, inside: dict[str, str | bytes]) -> None:
    zipped(tmp_path / "log.zip", inside)
    log = read(tmp_path, "log.zip")
    np.testing.assert_array_equal(log.channels["level"], np.arange(4.0))
    assert [item.path for item in log.inputs] == ["log.zip"]


def test_a_folder_of_archives(tmp_path: Path) -> None:
    for n in range(3):
        zipped(tmp_path / f"{n}.zip", {"log.csv": text_of(n, 1)})
    np.testing.assert_array_equal(read(tmp_path, ".").channels["level"], np.arange(3.0))


def test_a_long_log_in_an_archive(tmp_path: Path) -> None:
    rows = [*three(0, 2.0, 2.1, 50), *three(1, 2.2, 2.1, 51)]
    zipped(tmp_path / "log.csv", {"a.csv": "\n".join(["time,tag,value", *rows])})
    np.testing.assert_array_equal(read_log(long_loop(tmp_path)).channels[TAGS["level"]], [2.0, 2.2])


def test_a_row_in_an_archive_is_found_again(tmp_path: Path) -> None:
    zipped(tmp_path / "log.zip", {"a.csv": text_of(0, 3) + "yesterday,1,2\n" + text_of(4, 1, header="")})
    (problem,) = problems_of(tmp_path, "log.zip")
    assert problem.where == "log.zip/a.csv, line 5, time column"


@pytest.mark.parametrize("pack", ["gzip", "zstd", "zip"])
def test_what_unpacks_beyond_measure_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, pack: str) -> None:
    monkeypatch.setattr(packed, "MOST_BYTES", 100_000)
    # One row again and again: about a thousand times smaller when packed.
    bomb = (HEADER + "2025-01-01T00:00:00Z,1,5\n" * 400_000).encode()
    if pack == "zip":
        zipped(tmp_path / "log.csv", {"a.csv": bomb})
    else:
        (tmp_path / "log.csv").write_bytes(gzip.compress(bomb) if pack == "gzip" else zstandard(bomb))
    assert (tmp_path / "log.csv").stat().st_size * packed.MOST_TIMES < len(bomb)
    (problem,) = problems_of(tmp_path)
    assert "more than 200 times" in problem.what
    assert "log.csv" in problem.where


def test_a_small_log_may_be_packed_to_any_size(tmp_path: Path) -> None:
    (tmp_path / "log.csv").write_bytes(gzip.compress((HEADER + "2025-01-01T00:00:00Z,1,5\n" * 40_000).encode()))
    assert read(tmp_path).rows == 40_000


def test_a_member_that_says_it_is_small_is_stopped_too(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    zipped(tmp_path / "log.zip", {"a.csv": b"1" * 1_000_000})
    (member,) = members(tmp_path / "log.zip", "log.zip", ())
    assert member == Member(tmp_path / "log.zip", "a.csv")
    monkeypatch.setattr(packed, "MOST_BYTES", 1000)
    with pytest.raises(packed.LogError, match="200 times"):
        head(member, 1_000_000)


@pytest.mark.parametrize("pack", [zstandard, gzip.compress])
def test_a_damaged_packed_file_is_refused(tmp_path: Path, pack) -> None:  # type: ignore[no-untyped-def]
    noise = np.random.default_rng(1).integers(10, 99, 100_000)
    raw = pack((HEADER + "".join(f"2025-01-01T00:00:00Z,{n},5\n" for n in noise)).encode())
    (tmp_path / "log.csv").write_bytes(raw[: len(raw) // 2])
    (problem,) = problems_of(tmp_path)
    assert "log.csv" in problem.where


def test_a_damaged_member_is_refused(tmp_path: Path) -> None:
    zipped(tmp_path / "log.csv", {"a.csv": text_of(0, 50)})
    raw = bytearray((tmp_path / "log.csv").read_bytes())
    raw[60:70] = b"\x00" * 10
    (tmp_path / "log.csv").write_bytes(raw)
    (problem,) = problems_of(tmp_path)
    assert problem.where == "log.csv/a.csv"


def test_an_encrypted_archive_is_refused(tmp_path: Path) -> None:
    zipped(tmp_path / "log.csv", {"a.csv": text_of(0, 5)})
    raw = bytearray((tmp_path / "log.csv").read_bytes())
    for start, place in ((b"PK\x03\x04", 6), (b"PK\x01\x02", 8)):  # the flags in the two headers of the member
        raw[raw.index(start) + place] |= 1
    (tmp_path / "log.csv").write_bytes(raw)
    (problem,) = problems_of(tmp_path)
    assert "encrypted" in problem.what


def test_an_archive_in_an_archive_is_refused(tmp_path: Path) -> None:
    zipped(tmp_path / "inner.zip", {"a.csv": text_of(0, 5)})
    zipped(tmp_path / "log.csv", {"a.csv": (tmp_path / "inner.zip").read_bytes()})
    (problem,) = problems_of(tmp_path)
    assert "inside a zip archive" in problem.what
