"""What is looked for in a log: one check per file, all in `CHECKS`.

A check takes an `Evidence` (arrays only, nothing is changed), and returns one `Finding` per signal, or none. Many
single events make one finding with their number, their first and last time, and the longest in the detail. What was
done about it has been done by the alignment already; the finding's `effect` says so.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from auditor.logs.findings import (
    backward_clock,
    bad_value,
    bridged,
    clock_drift,
    clock_step,
    coarse_log,
    constant_actuator,
    coverage,
    duplicate,
    exception_reported,
    excluded,
    fine_log,
    gap,
    interpolated,
    jitter,
    manual,
    on_change,
    out_of_range,
    quantised,
    saturation,
    sentinel,
    stray_stamp,
    stuck,
)
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Check, Evidence

CHECKS: Mapping[str, Check] = MappingProxyType(
    {
        "coverage": coverage.find,
        "stray-stamp": stray_stamp.find,
        "backward-clock": backward_clock.find,
        "duplicate": duplicate.find,
        "clock-step": clock_step.find,
        "clock-drift": clock_drift.find,
        "jitter": jitter.find,
        "coarse-log": coarse_log.find,
        "fine-log": fine_log.find,
        "gap": gap.find,
        "bridged": bridged.find,
        "manual": manual.find,
        "excluded": excluded.find,
        "bad-value": bad_value.find,
        "on-change": on_change.find,
        "sentinel": sentinel.find,
        "out-of-range": out_of_range.find,
        "stuck": stuck.find,
        "interpolated": interpolated.find,
        "exception-reported": exception_reported.find,
        "quantised": quantised.find,
        "saturation": saturation.find,
        "constant-actuator": constant_actuator.find,
    }
)
"""The checks by the kind of finding they return, in the order the findings are told."""


def look(seen: Evidence) -> tuple[Finding, ...]:
    """Run every check over the evidence."""
    return tuple(finding for check in CHECKS.values() for finding in check(seen))


__all__ = ["CHECKS", "Check", "Evidence", "Finding", "look"]
