"""Operation that was not automatic."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import plural, spells_of
from auditor.text import percent

_MUCH = 0.2
_NAMED = 5


def find(seen: Evidence) -> list[Finding]:
    """Report samples at which the mode column says anything but automatic."""
    spells = spells_of(seen.manual, seen)
    if spells is None:
        return []
    share = spells.samples / len(seen.manual)
    usual = sorted(seen.modes.items(), key=lambda item: (-item[1], item[0]))[:_NAMED]
    named = ", ".join(f'"{text}" ({plural(rows, "row")})' for text, rows in usual) or "no mode stored yet"
    return [
        Finding(
            kind="manual",
            start=spells.start,
            end=spells.end,
            count=spells.samples,
            detail=f"{spells.told('spell')}, {percent(share, 2)} of the samples: {named}",
            effect="not used, and the record is cut there",
            signal="mode",
            weight="stops the answer" if share == 1 else "limits the answer" if share > _MUCH else "note",
        )
    ]
