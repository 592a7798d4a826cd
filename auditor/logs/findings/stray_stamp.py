"""Rows whose stamp is no part of the log: no time at all, or further away than the log is long."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import moment, plural


def find(seen: Evidence) -> list[Finding]:
    """Report the rows left out for their stamps."""
    if len(seen.stray) == 0:
        return []
    first, last = int(seen.stray[0]), int(seen.stray[-1])
    return [
        Finding(
            kind="stray-stamp",
            start=None,
            end=None,
            count=len(seen.stray),
            detail=f"{plural(len(seen.stray), 'row')} far from the rest of the log, which runs from "
            f"{moment(int(seen.stamps[0]))} to {moment(int(seen.stamps[-1]))}: {moment(first)}"
            + (f" … {moment(last)}" if last != first else ""),
            effect="rows left out",
        )
    ]
