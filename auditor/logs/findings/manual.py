"""Operation that was not automatic."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import plural, spells_of
from auditor.text import nearest, percent

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
    told = _none_occurs(seen) + named if seen.unmet and seen.modes else named
    return [
        Finding(
            kind="manual",
            start=spells.start,
            end=spells.end,
            count=spells.samples,
            detail=f"{spells.told('spell')}, {percent(share, 2)} of the samples: {told}",
            effect="not used, and the record is cut there",
            signal="mode",
            weight="stops the answer" if share == 1 else "limits the answer" if share > _MUCH else "note",
        )
    ]


def _none_occurs(seen: Evidence) -> str:
    """Say that the column never holds what was stated, and what may have been meant."""
    stated = ", ".join(f'"{text}"' for text in seen.unmet)
    known = {text.casefold(): text for text in seen.modes}
    close = next((near for text in seen.unmet if (near := nearest(text.casefold(), known, cutoff=0.6))), None)
    meant = f' (did you mean "{known[close]}"?)' if close else ""
    return f"none of the stated automatic values {stated} occurs{meant}, the log holds "
