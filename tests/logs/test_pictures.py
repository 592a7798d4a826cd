"""Every finding has its picture on the page of findings, with a text for those who cannot see it."""

from __future__ import annotations

import re
from pathlib import Path

from auditor.logs.findings import CHECKS

DOCS = Path(__file__).parents[2] / "docs"


def test_every_finding_has_a_picture_with_a_text_of_its_own() -> None:
    shown = re.findall(
        r"^!\[(.+)\]\(pictures/findings/(.+)\.png\)$", (DOCS / "findings.md").read_text("utf-8"), re.MULTILINE
    )
    assert [kind for _, kind in shown] == list(CHECKS)
    assert len({text for text, _ in shown}) == len(CHECKS)
    files = list((DOCS / "pictures" / "findings").glob("*.png"))
    assert {path.stem for path in files} == set(CHECKS)
    assert sum(path.stat().st_size for path in files) < 1_500_000
