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
    mixed_period,
    on_change,
    out_of_range,
    quantised,
    range_wrap,
    saturation,
    sensor_reset,
    sentinel,
    setpoint_ramp,
    spike,
    stale_hold,
    stray_stamp,
    stuck,
    unit_change,
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
        "mixed-period": mixed_period.find,
        "gap": gap.find,
        "bridged": bridged.find,
        "manual": manual.find,
        "excluded": excluded.find,
        "bad-value": bad_value.find,
        "on-change": on_change.find,
        "sentinel": sentinel.find,
        "out-of-range": out_of_range.find,
        "spike": spike.find,
        "sensor-reset": sensor_reset.find,
        "range-wrap": range_wrap.find,
        "unit-change": unit_change.find,
        "stuck": stuck.find,
        "stale-hold": stale_hold.find,
        "interpolated": interpolated.find,
        "exception-reported": exception_reported.find,
        "quantised": quantised.find,
        "setpoint-ramp": setpoint_ramp.find,
        "saturation": saturation.find,
        "constant-actuator": constant_actuator.find,
    }
)
"""The checks by the kind of finding they return, in the order the findings are told."""


def look(seen: Evidence) -> tuple[Finding, ...]:
    """Run every check over the evidence."""
    return tuple(finding for check in CHECKS.values() for finding in check(seen))


__all__ = ["CHECKS", "Check", "Evidence", "Finding", "look"]
