"""Stretches without any row."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import GAP, Evidence
from auditor.logs.findings.wording import spells_of
from auditor.text import duration, percent

_MUCH = 0.05


def find(seen: Evidence) -> list[Finding]:
    """Report the samples for which the log has no row."""
    spells = spells_of(seen.cause == GAP, seen)
    if spells is None:
        return []
    share = spells.samples / len(seen.cause)
    return [
        Finding(
            kind="gap",
            start=spells.start,
            end=spells.end,
            count=spells.count,
            detail=f"{spells.told('gap')}, {percent(share, 2)} of the samples",
            effect=f"held where at most {duration(seen.bridge)}, else the record is cut there",
            weight="limits the answer" if share > _MUCH else "note",
        )
    ]
