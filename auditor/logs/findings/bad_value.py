"""Rows that are there, without a number in a cell that should have one."""

from __future__ import annotations

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import EMPTY, Evidence
from auditor.logs.findings.wording import spells_of
from auditor.text import percent

_MUCH = 0.05


def find(seen: Evidence) -> list[Finding]:
    """Report, per signal, the samples at which the log has rows but no usable number."""
    findings = []
    for trace in seen.recorded_traces:
        if trace.held:
            continue
        spells = spells_of((trace.state == EMPTY) & (trace.sampled != trace.sampled), seen)
        if spells is None:
            continue
        share = spells.samples / len(trace.state)
        findings.append(
            Finding(
                kind="bad-value",
                start=spells.start,
                end=spells.end,
                count=spells.samples,
                detail=f"rows without a number: {spells.told('stretch')}, {percent(share, 2)} of the samples",
                effect="held where short, else the record is cut there",
                signal=trace.name,
                weight="limits the answer" if share > _MUCH else "note",
            )
        )
    return findings
