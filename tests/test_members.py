"""Members of one table do not know each other, so that one can be added or taken away without a look at the rest."""

from __future__ import annotations

import ast
import importlib
from collections.abc import Iterator
from pathlib import Path

import pytest

from auditor.dangers import DETECTORS
from auditor.logs.findings import CHECKS
from auditor.rules import RULES

ROOMS = {
    "rules": {f"auditor.rules.{name.replace('-', '_')}" for name in RULES},
    "findings": {find.__module__ for find in CHECKS.values()},
    "detectors": {detector.__name__ for detector in DETECTORS},  # type: ignore[attr-defined]
}
# A dead-band on the command is send-on-delta on another link: the same compiled function.
SHARED = {("auditor.rules.actuator_deadband", "auditor.rules.send_on_delta")}


def imported(module: str) -> Iterator[str]:
    """Modules a module imports, and what it takes from them, by full name."""
    source = Path(str(importlib.import_module(module).__file__)).read_text("utf-8")
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            yield from (name.name for name in node.names)
        if isinstance(node, ast.ImportFrom):
            yield str(node.module)
            yield from (f"{node.module}.{name.name}" for name in node.names)


@pytest.mark.parametrize("room", ROOMS)
def test_members_of_a_room_do_not_know_each_other(room: str) -> None:
    members = ROOMS[room]
    assert len(members) >= 2
    known = {(one, other) for one in members for other in imported(one) if other in members and other != one}
    assert known - SHARED == set()
