"""Signals that are stored only when they change, stated or not."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import EMPTY, USABLE, Evidence, Trace
from auditor.text import percent

_SPARSE = 0.6


def find(seen: Evidence) -> list[Finding]:
    """Report what was held between stored values, and signals that look as if they should be."""
    findings = []
    for trace in seen.recorded_traces:
        finding = _held(trace, seen) if trace.held else _sparse(trace, seen)
        findings.extend([finding] if finding else [])
    return findings


def _held(trace: Trace, seen: Evidence) -> Finding | None:
    """Report samples at which a held signal had rows, or an earlier value, but no number of its own."""
    filled = (trace.state != USABLE) & np.isfinite(trace.sampled) & (seen.traces[0].state == USABLE)
    missing = int(np.sum(np.isnan(trace.sampled)))
    if not filled.any() and not missing:
        return None
    at = np.flatnonzero(filled | np.isnan(trace.sampled))
    before = f"; {missing} samples before the first one have none" if missing else ""
    return Finding(
        kind="on-change",
        start=seen.time_at(int(at[0])),
        end=seen.time_at(int(at[-1])),
        count=len(at),
        detail=f"no stored value at {percent(len(at) / len(trace.state), 2)} of the samples" + before,
        effect="the last stored value held, however long, as it stands until changed" + _leading(trace, missing),
        signal=trace.name,
    )


def _leading(trace: Trace, missing: int) -> str:
    """Say what happened to samples before the first stored value."""
    if not missing:
        return ""
    return "; the first one used before it" if trace.role == "disturbance" else "; samples without one not used"


def _sparse(trace: Trace, seen: Evidence) -> Finding | None:
    """Report an actuator or measurement with numbers in a minority of the rows."""
    rows = np.logical_or.reduce([other.state >= EMPTY for other in seen.recorded_traces])
    share = float(np.mean(trace.state[rows] == USABLE)) if rows.any() else 1.0
    if share >= _SPARSE or not np.isfinite(trace.values).any():
        return None
    return Finding(
        kind="on-change",
        start=None,
        end=None,
        count=int(np.sum(trace.state == USABLE)),
        detail=f"a number at only {percent(share)} of the samples that have rows",
        effect='the others are holes; state stored = "on-change" if the archive stores this signal on change only',
        signal=trace.name,
        weight="limits the answer",
    )
