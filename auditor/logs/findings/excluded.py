"""Stretches the owner took out."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import spells_of
from auditor.text import percent


def find(seen: Evidence) -> list[Finding]:
    """Report the samples inside the loop file's exclusions, with their reasons."""
    spells = spells_of(seen.excluded, seen)
    if spells is None:
        return []
    share = spells.samples / len(seen.excluded)
    reasons = "; ".join(dict.fromkeys(seen.reasons))
    return [
        Finding(
            kind="excluded",
            start=spells.start,
            end=spells.end,
            count=spells.samples,
            detail=f"{spells.told('stretch')}, {percent(share, 2)} of the samples: {reasons}",
            effect="not used, and the record is cut there",
        )
    ]
