"""Open data written as logs and loop files, once per session."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from auditor.cli.app import run
from tests.outside import dryer
from tests.outside.eastman import Eastman

Audited = tuple[int, dict[str, Any], Path]


@pytest.fixture(scope="session")
def eastman(tmp_path_factory: pytest.TempPathFactory) -> Eastman:
    return Eastman(tmp_path_factory.mktemp("eastman"))


@pytest.fixture(scope="session")
def dryer_log(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return dryer.write_log(tmp_path_factory.mktemp("dryer"))


@pytest.fixture
def audited(tmp_path: Path) -> Callable[[Path], Audited]:
    """Run the whole audit as the program does, write its files, and return its exit code, its result, its folder."""

    def whole(loop: Path) -> Audited:
        folder = tmp_path / loop.stem
        code = run(["audit", str(loop), "--out", str(folder), "--quick"])
        assert (folder / "report.html").stat().st_size > 0
        return code, json.loads((folder / "audit.json").read_text(encoding="utf-8")), folder

    return whole
