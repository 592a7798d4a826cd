"""Values outside the plausible range, and an actuator outside its stated limits."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.findings.wording import moment, plural
from auditor.text import percent

_MUCH = 0.01
_ROUNDING = 1e-6


def find(seen: Evidence) -> list[Finding]:
    """Report, per signal, values outside what the loop file states."""
    findings = []
    for trace in seen.recorded_traces:
        finding = _beyond_limits(trace, seen) if trace.role == "actuator" else _implausible(trace, seen)
        findings.extend([finding] if finding else [])
    return findings


def _implausible(trace: Trace, seen: Evidence) -> Finding | None:
    """Report values that were not used."""
    taken = trace.removed.get("outside", np.empty(0))
    at = seen.stamps[trace.spoiled["outside"]] if len(taken) else np.empty(0, dtype=np.int64)
    if len(taken) == 0:
        return None
    last = "the last plausible one held" if trace.held else "held where short, else the record is cut there"
    return Finding(
        kind="out-of-range",
        start=int(at[0]) if len(at) else None,
        end=int(at[-1]) if len(at) else None,
        count=len(taken),
        detail=f"{plural(len(taken), 'value')} outside {_range(trace)}, from {taken.min():g} to {taken.max():g}"
        + (f", the first at {moment(int(at[0]))}" if len(at) else ""),
        effect=f"not used; {last}",
        signal=trace.name,
        weight="limits the answer" if len(taken) > _MUCH * len(trace.values) else "note",
    )


def _beyond_limits(trace: Trace, seen: Evidence) -> Finding | None:
    """Report an actuator recorded outside its limits: then the limits, or the signal, are not what they seem."""
    low, high = -np.inf if trace.low is None else trace.low, np.inf if trace.high is None else trace.high
    span = high - low if np.isfinite(high - low) else max(abs(v) for v in (low, high, 0.0) if np.isfinite(v))
    slack = max(_ROUNDING * span, 0.5 * (trace.quantum or 0.0))
    with np.errstate(invalid="ignore"):
        beyond = (trace.values < low - slack) | (trace.values > high + slack)
    if not beyond.any():
        return None
    values, at = trace.values[beyond], seen.stamps[beyond]
    share = len(values) / len(trace.values)
    return Finding(
        kind="out-of-range",
        start=int(at[0]),
        end=int(at[-1]),
        count=len(values),
        detail=f"{plural(len(values), 'value')}, {percent(share, 2)}, outside the actuator's limits {_range(trace)}, "
        f"from {values.min():g} to {values.max():g}",
        effect="kept as recorded; wrong limits make the replayed controller another one: check them",
        signal=trace.name,
        weight="limits the answer" if share > _MUCH else "note",
    )


def _range(trace: Trace) -> str:
    """Write the stated range."""
    low = "…" if trace.low is None else f"{trace.low:g}"
    high = "…" if trace.high is None else f"{trace.high:g}"
    return f"{low}…{high} {trace.unit}".rstrip().replace("………", "…").replace("……", "…")
