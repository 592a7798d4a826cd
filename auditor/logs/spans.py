"""Which samples may be used: why not, over which spans a replay may run, and the holes that are held (method, §1)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from types import MappingProxyType

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, read_only
from auditor.logs.findings.bridged import describe_bridges
from auditor.logs.findings.evidence import (
    ABSENT,
    BAD_VALUE,
    EXCLUDED,
    GAP,
    MANUAL,
    OUT_OF_RANGE,
    OUTSIDE,
    Trace,
)
from auditor.logs.record import CAUSES, Record, Span
from auditor.logs.runs import hold, runs_of

SHORTEST = 50
"""Samples below which a span is not kept: no warm-up of a loop worth sampling is shorter (tau_cl ≥ 5 h)."""

BRIDGED_PERIODS = 2
"""Periods that are bridged before the closed loop's time constant is known."""


def causes(
    measurement: Trace, setpoint: Trace, actuator: Trace, manual: BoolArray, excluded: BoolArray
) -> npt.NDArray[np.int8]:
    """Return why each sample is not valid, 0 where it is, shape (N,).

    The owner's word comes before the mode, the mode before what is missing: a hole in a manual spell is manual.
    """
    cause = np.zeros(len(measurement.sampled), dtype=np.int8)
    for trace in (setpoint, actuator, measurement):
        missing = np.isnan(trace.sampled)
        cause[missing] = BAD_VALUE
        cause[missing & (trace.state == OUTSIDE)] = OUT_OF_RANGE
    for trace in (actuator, measurement):
        cause[np.isnan(trace.sampled) & (trace.state == ABSENT)] = GAP
    cause[manual] = MANUAL
    cause[excluded] = EXCLUDED
    return cause


def spans_of(
    valid: BoolArray, bridge_samples: int, shortest: int = SHORTEST, cut: BoolArray | None = None
) -> tuple[Span, ...]:
    """Return the stretches a replay may run over.

    Parameters
    ----------
    valid : ndarray of bool, shape (N,)
        True where a sample may be used.
    bridge_samples : int
        Longest hole, in samples, that does not end a span.
    shortest : int
        Samples below which a span is not returned.
    cut : ndarray of bool, shape (N,), or None
        True where a sample ends a span however short the hole is (manual, excluded).

    Returns
    -------
    tuple of Span
        In order of time; every span begins and ends with a valid sample.
    """
    usable = valid if cut is None else valid & ~cut
    starts, stops = runs_of(usable)
    if len(starts) == 0:
        return ()
    apart = starts[1:] - stops[:-1] > bridge_samples
    if cut is not None:
        before = np.concatenate(([0], np.cumsum(cut)))
        apart |= before[starts[1:]] > before[stops[:-1]]
    first = np.concatenate(([0], np.flatnonzero(apart) + 1))
    last = np.concatenate((np.flatnonzero(apart), [len(starts) - 1]))
    return tuple(
        Span(int(start), int(stop))
        for start, stop in zip(starts[first], stops[last], strict=True)
        if stop - start >= shortest
    )


def bridge_samples(period: float, seconds: float) -> int:
    """Return the longest hole that is held [samples]: max(2 h, `seconds`)."""
    return max(BRIDGED_PERIODS, int(seconds / period + 1e-9))


def inside(spans: Sequence[Span], count: int) -> BoolArray:
    """Return True inside the spans, shape (`count`,)."""
    mask = np.zeros(count, dtype=np.bool_)
    for span in spans:
        mask[span.start : span.stop] = True
    return mask


def held_inside(values: FloatArray, within: BoolArray) -> FloatArray:
    """Hold the last value through the holes inside the spans; outside them holes stay NaN."""
    missing = within & np.isnan(values)
    return np.where(missing, hold(values), values) if missing.any() else values


def lost_hours(cause: npt.NDArray[np.int8], spans: Sequence[Span], period: float) -> Mapping[str, float]:
    """Return the hours outside all spans by cause; valid samples of spans that are too short are "short span"."""
    outside = cause[~inside(spans, len(cause))]
    samples = np.bincount(outside, minlength=len(CAUSES))
    names = ("short span", *CAUSES[1:])
    return MappingProxyType({name: float(n) * period / 3600.0 for name, n in zip(names, samples, strict=True) if n > 0})


def bridge(record: Record, seconds: float) -> Record:
    """Return the record with holes of at most max(2 h, `seconds`) held instead of cutting it.

    Manual operation and exclusions always cut. Call it on the record as aligned, once the closed loop's time
    constant is known (`seconds` = tau_cl / 10): holes that are held already stay held.

    Parameters
    ----------
    record : Record
    seconds : float
        Longest hole to be held [s].
    """
    cause = _cause(record)
    samples = bridge_samples(record.period, seconds)
    cut = (cause == MANUAL) | (cause == EXCLUDED)
    spans = spans_of(record.valid, samples, SHORTEST, cut)
    within = inside(spans, len(record))
    told = describe_bridges(within & ~record.valid, record.start, record.period, samples * record.period)
    return replace(
        record,
        y=read_only(held_inside(record.y, within)),
        r=read_only(held_inside(record.r, within)),
        u=read_only(held_inside(record.u, within)),
        spans=spans,
        lost_hours=lost_hours(cause, spans, record.period),
        findings=tuple(f for f in record.findings if f.kind != "bridged") + tuple(told),
    )


def _cause(record: Record) -> npt.NDArray[np.int8]:
    """Return the causes, every unusable sample a gap where the record does not say."""
    if record.cause is not None:
        return record.cause
    return np.where(record.valid, 0, GAP).astype(np.int8)
