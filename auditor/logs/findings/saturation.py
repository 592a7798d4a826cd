"""The actuator at its limits, or resting at an end that nobody stated."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.findings.wording import plural, spells_of
from auditor.text import percent

_MUCH = 0.2
_PILE_SHARE = 0.005
_PILE = 20
_PILE_OVER_NEXT = 3
_ROUNDING = 1e-6


def find(seen: Evidence) -> list[Finding]:
    """Report how long the actuator rests at its stated limits, and ends it piles up at without a stated one."""
    trace = seen.trace("actuator")
    moving = trace.values[np.isfinite(trace.values)]
    if trace.constant or len(moving) == 0 or np.ptp(moving) == 0:
        return []
    findings = []
    for end, limit, sign in (("low", trace.low, -1.0), ("high", trace.high, 1.0)):
        finding = _unstated(trace, seen, end, sign) if limit is None else _at_limit(trace, seen, end, limit, sign)
        findings.extend([finding] if finding else [])
    return findings


def _slack(trace: Trace, level: float) -> float:
    """Return how near to a limit counts as at it [unit]: half a stored step, at least the rounding."""
    return max(0.5 * (trace.quantum or 0.0), _ROUNDING * max(abs(level), float(np.nanstd(trace.values))))


def _at_limit(trace: Trace, seen: Evidence, end: str, limit: float, sign: float) -> Finding | None:
    """Report the samples at a stated limit."""
    resting = _beyond(trace.sampled, limit, sign, _slack(trace, limit)) & (seen.cause == 0)
    spells = spells_of(resting, seen)
    if spells is None:
        return None
    share = spells.samples / max(1, int(np.sum(seen.cause == 0)))
    return Finding(
        kind="saturation",
        start=spells.start,
        end=spells.end,
        count=spells.samples,
        detail=f"at its {end} limit {limit:g} {trace.unit}".rstrip()
        + f" for {percent(share, 2)} of the valid samples: {spells.told('spell')}",
        effect="none on the values; the controller is judged on samples away from the limits",
        signal=trace.name,
        weight="limits the answer" if share > _MUCH else "note",
    )


def _beyond(values: FloatArray, limit: float, sign: float, slack: float) -> BoolArray:
    """Return True at or past a limit; `sign` is +1 for the upper one."""
    with np.errstate(invalid="ignore"):
        return np.asarray(sign * (values - limit) >= -slack)


def _unstated(trace: Trace, seen: Evidence, end: str, sign: float) -> Finding | None:
    """Report an extreme value the actuator has far more often than the one next to it."""
    signed = sign * trace.sampled[seen.cause == 0]
    if len(signed) == 0:
        return None
    extreme = float(signed.max())
    slack = _slack(trace, extreme)
    piled = int(np.sum(signed >= extreme - slack))
    below = signed[signed < extreme - slack]
    if len(below) == 0 or piled < max(_PILE, _PILE_SHARE * len(signed)):
        return None
    if piled <= _PILE_OVER_NEXT * int(np.sum(below >= below.max() - slack)):
        return None
    return Finding(
        kind="saturation",
        start=None,
        end=None,
        count=piled,
        detail=f"{plural(piled, 'valid sample')}, {percent(piled / len(signed), 2)}, at exactly {sign * extreme:g} "
        f"{trace.unit}".rstrip()
        + f", its {end}est value: that looks like a limit",
        effect=f"none; state {end} for the actuator if it is one, as a missing limit makes the controller another one",
        signal=trace.name,
        weight="limits the answer",
    )
