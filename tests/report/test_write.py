from __future__ import annotations

import errno
import json
import os
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from auditor.audit import Audit
from auditor.errors import OutputError
from auditor.report import write as writing
from auditor.report import write_audit
from auditor.report.content import gather
from auditor.report.figures import FIGURES
from tests.report import fake_audit


def _names(out: Path) -> set[str]:
    return {path.relative_to(out).as_posix() for path in out.rglob("*") if path.is_file()}


def test_exactly_the_files_of_an_audit_are_written(audit: Audit, written: Path) -> None:
    pictures = {f"figures/{name}.{kind}" for name in FIGURES for kind in ("png", "svg")}
    series = {f"series/{index}.parquet" for index in gather(audit).shown}
    tables = {"report.html", "audit.json", "model.json", "replays.csv", "flags.csv"}
    assert _names(written) == tables | pictures | series
    assert len(series) > 1
    assert json.loads((written / "model.json").read_text()) == {"seed": 1}


def test_a_series_holds_the_record_and_the_replay(audit: Audit, written: Path) -> None:
    index = audit.recommendation.replay
    assert index is not None
    table = pd.read_parquet(written / f"series/{index}.parquet")
    series = audit.replays[index].series
    assert series is not None
    np.testing.assert_array_equal(table["replayed_measurement"], series.y)
    np.testing.assert_array_equal(table["measurement"], audit.record.y)
    np.testing.assert_array_equal(table["updated"], series.updated)
    assert str(table["time"].dt.tz) == "UTC"
    assert table["time"].iloc[-1].value == int(audit.record.time_ns(len(audit.record) - 1))


@pytest.fixture
def bare(audit: Audit) -> Audit:
    return fake_audit.without_model(audit)


def test_files_that_a_later_audit_does_not_write_are_removed(bare: Audit, tmp_path: Path) -> None:
    (tmp_path / "series").mkdir()
    (tmp_path / "figures").mkdir()
    for name in ("series/7.parquet", "figures/trade-off.svg", "series/mine.parquet", "figures/photo.png", "notes.txt"):
        (tmp_path / name).write_text("old")
    files = write_audit(bare, tmp_path / ".")
    assert "series/7.parquet" not in _names(tmp_path)
    assert "figures/trade-off.svg" not in _names(tmp_path)
    assert {"series/mine.parquet", "figures/photo.png", "notes.txt"} <= _names(tmp_path)
    assert {file.relative_to(tmp_path).as_posix() for file in files} <= _names(tmp_path)


def test_a_full_disk_leaves_nothing_and_says_so(bare: Audit, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write = Path.write_bytes

    def full(path: Path, body: bytes) -> int:
        if path.suffix == ".part" and "figures" in path.parts:
            write(path, body[:10])
            raise OSError(errno.ENOSPC, "No space left on device", str(path))
        return write(path, body)

    monkeypatch.setattr(Path, "write_bytes", full)
    with pytest.raises(OutputError, match="the disk is full") as caught:
        write_audit(bare, tmp_path / "new" / "audit")
    assert caught.value.exit_code == 3
    assert list(tmp_path.iterdir()) == []


def test_a_failed_write_keeps_the_earlier_audit(bare: Audit, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "report.html").write_text("earlier")

    def refuse(path: Path, body: bytes) -> int:
        raise PermissionError(errno.EACCES, "Permission denied", str(path))

    monkeypatch.setattr(Path, "write_bytes", refuse)
    with pytest.raises(OutputError, match="cannot be written to"):
        write_audit(bare, tmp_path)
    assert _names(tmp_path) == {"report.html"}
    assert (tmp_path / "report.html").read_text() == "earlier"


def test_a_file_in_place_of_the_folder_is_told(bare: Audit, tmp_path: Path) -> None:
    (tmp_path / "audit").write_text("a file")
    with pytest.raises(OutputError, match="a file where a folder is needed"):
        write_audit(bare, tmp_path / "audit")
    assert (tmp_path / "audit").read_text() == "a file"


def test_a_fault_of_the_program_leaves_no_half_result(
    audit: Audit, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(writing, "draw_all", lambda content: {})

    def broken(model: object) -> str:
        raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        write_audit(audit, tmp_path / "out", broken)
    assert list(tmp_path.iterdir()) == []


def test_every_file_comes_into_place_by_renaming(bare: Audit, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    moved: list[tuple[Path, Path]] = []
    rename: Callable[[Path, Path], None] = os.replace

    def watch(source: Path, target: Path) -> None:
        moved.append((source, target))
        rename(source, target)

    monkeypatch.setattr(writing.os, "replace", watch)
    files = write_audit(bare, tmp_path)
    assert [target for _, target in moved] == files
    assert all(source.parent == target.parent for source, target in moved)
    assert _names(tmp_path) == {file.relative_to(tmp_path).as_posix() for file in files}


def test_a_replay_without_signals_has_no_series_file(
    audit: Audit, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(writing, "draw_all", lambda content: {})
    silent = replace(audit, replays=tuple(replace(one, series=None) for one in audit.replays))
    assert not [file for file in write_audit(silent, tmp_path) if file.parent.name == "series"]
