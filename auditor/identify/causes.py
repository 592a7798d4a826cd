"""Why a record does not come back: each likely cause is tested for by mending it and looking at the null replay."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace
from itertools import pairwise

import numpy as np

from auditor.arrays import FloatArray
from auditor.controllers.pid import INTEGRALS, Pid
from auditor.identify import thresholds
from auditor.identify.alignment import lay_out, shift_actuator, skew_words
from auditor.identify.gains import coefficients_of, terms_of
from auditor.identify.limits import saturates, stuck_at_extreme
from auditor.identify.plant import Plant
from auditor.identify.regression import Signals, read_signals, solve
from auditor.identify.residual import (
    controller_residual,
    explained_by_disturbances,
    moves,
    null_replay,
    within,
)
from auditor.logs.record import Record, Span
from auditor.text import duration, number, percent

_RESTING = 0.5
"""Share of samples at which a compressed or rounded actuator rests while the error moves."""

_MANUAL = 60
"""Samples in a row at which a free actuator must rest before it looks like manual operation."""


def likely_causes(record: Record, controller: Pid, plant: Plant, null: float) -> tuple[str, ...]:
    """Name what most likely keeps the record from coming back, most telling first.

    Parameters
    ----------
    record : Record
        With the actuator already shifted to where it acts.
    controller : Pid
    plant : Plant
        The most likely one.
    null : float
        The null replay without injection.

    Returns
    -------
    tuple of str
        Empty when the null replay is good; one sentence when nothing that was tested is the cause.
    """
    if null <= thresholds.NULL_GOOD:
        return ()
    rho = controller_residual(record, controller).rho
    found = (
        *_skew(record, controller, plant, null),
        *_limits(record, controller, plant, null),
        *_form(record, controller, plant, null),
        *_rounding(record),
        *_retuning(record, controller),
        *_gains(record, controller, plant, null),
        *_feedforward(record, rho),
        *_manual(record),
    )
    return found or (
        "nothing that was tested explains it (skew, limits, integral form, rounding, retuning, gains, feedforward, "
        "manual operation): the actuator obeys another law, or a hand",
    )


def _skew(record: Record, controller: Pid, plant: Plant, null: float) -> Iterator[str]:
    for lag in (1, -1, 2, -2):
        if null_replay(shift_actuator(record, lag), controller, plant) < thresholds.CAUSE_HALVES * null:
            yield skew_words(lag)
            return


def _limits(record: Record, controller: Pid, plant: Plant, null: float) -> Iterator[str]:
    """Limits inside the record's own range, or an actuator that stops short of them."""
    inside = record.u[record.in_span]
    low, high = float(np.nanmin(inside)), float(np.nanmax(inside))
    stuck = stuck_at_extreme(record)
    stops_high = bool(np.any(stuck & (record.u == high))) or high > controller.high
    stops_low = bool(np.any(stuck & (record.u == low))) or low < controller.low
    other = replace(controller, low=low if stops_low else controller.low, high=high if stops_high else controller.high)
    if (other.low, other.high) == (controller.low, controller.high):
        return
    if null_replay(record, other, plant) < thresholds.CAUSE_HALVES * null:
        yield (
            f"wrong limits: the actuator moves between {number(low)} and {number(high)}, "
            f"the limits are {number(controller.low)} and {number(controller.high)}"
        )


def _form(record: Record, controller: Pid, plant: Plant, null: float) -> Iterator[str]:
    for form in INTEGRALS:
        other = replace(controller, integral=form)
        if form != controller.integral and null_replay(record, other, plant) < thresholds.CAUSE_HALVES * null:
            yield f"wrong integral form: '{form}' returns the record better than '{controller.integral}'"
            return


def _rounding(record: Record) -> Iterator[str]:
    inside = within(record)
    resting = float(np.mean((moves(record.u) == 0)[inside] & (moves(record.e) != 0)[inside])) if inside.any() else 0.0
    if resting < _RESTING:
        return
    if record.u_quantum is not None:
        yield f"the actuator is rounded to {number(record.u_quantum)}: it rests on {percent(resting)} of the samples"
    elif not saturates(record):
        yield f"the actuator looks compressed by its archive: it rests on {percent(resting)} of the samples"


def _retuning(record: Record, controller: Pid) -> Iterator[str]:
    """Fit the gains on thirds of the record; settings that someone changed differ between them."""
    whole, *thirds = (_fitted(part, controller) for part in (record, *_thirds(record)))
    if whole is None or any(part is None for part in thirds):
        return
    table = np.array([part for part in thirds if part is not None])
    for column, name in zip(table.T, ("gain", "integral action"), strict=False):
        spread = float(np.ptp(column)) / max(abs(float(np.median(column))), np.finfo(float).tiny)
        if spread > thresholds.RETUNED:
            values = ", ".join(number(float(value)) for value in column)
            yield f"the controller was retuned within the log: {name} over its thirds {values}"
            return


def _fitted(record: Record, controller: Pid) -> FloatArray | None:
    """Gain (backward form) and K/Ti of one part, None when it cannot tell them to `RETUNED`."""
    signals: Signals = read_signals(record, controller.error_deadband)
    terms = terms_of(controller, record.period)
    design = lay_out(signals, 0, terms, levels=record.u_quantum is not None)
    if len(design.target) < thresholds.ROWS_NEEDED:
        return None
    # Least absolute residuals: one manual stretch must not look like another gain.
    fit = solve(design, robust=True)
    if not math.isfinite(fit.relative) or fit.relative > thresholds.UNEXPLAINED_LIMIT:
        return None
    count = 2 if terms.integral else 1
    return np.asarray(fit.coefficients[:count] / np.array([1.0, record.period])[:count])


def _thirds(record: Record) -> Iterator[Record]:
    """Three parts of equal length, each with the spans inside it."""
    cuts = np.linspace(0, len(record), 4).astype(int)
    for start, stop in pairwise(cuts.tolist()):
        clipped = (Span(max(span.start, start), min(span.stop, stop)) for span in record.spans)
        yield replace(record, spans=tuple(span for span in clipped if len(span) > 1))


def _gains(record: Record, controller: Pid, plant: Plant, null: float) -> Iterator[str]:
    """Take the gains that the record itself shows."""
    fitted = _fitted(record, controller)
    if fitted is None or fitted[0] == 0.0:
        return
    time = float(fitted[0] / fitted[1]) if len(fitted) > 1 and fitted[1] != 0 else math.inf
    other = replace(controller, gain=float(fitted[0]), integral_time=time, integral="backward")
    if null_replay(record, other, plant) < thresholds.CAUSE_HALVES * null:
        given = replace(controller, gain=float(coefficients_of(controller, record.period)[0]))
        yield f"wrong gains: the record shows {_in_words(other)} (backward form), the controller has {_in_words(given)}"


def _in_words(controller: Pid) -> str:
    time = duration(controller.integral_time) if math.isfinite(controller.integral_time) else "none"
    return f"gain {number(controller.gain)} and integral time {time}"


def _feedforward(record: Record, rho: FloatArray) -> Iterator[str]:
    share = explained_by_disturbances(rho, record)
    if share >= thresholds.FEEDFORWARD_SHARE:
        yield f"feedforward: declared disturbances explain {percent(share)} of what the controller leaves unexplained"


def _manual(record: Record) -> Iterator[str]:
    """A free actuator that rests for long while the error moves."""
    if record.u_quantum is not None:
        return
    longest = 0
    for span in record.spans:
        u = record.u[span.start : span.stop]
        edges = np.flatnonzero(np.diff(u, prepend=np.nan, append=np.nan) != 0)
        lengths = np.diff(edges)
        limited = (u[edges[:-1]] >= record.high) | (u[edges[:-1]] <= record.low)
        longest = max(longest, int(np.max(np.where(limited, 0, lengths), initial=0)))
    if longest >= _MANUAL:
        yield f"manual operation: the actuator rests for {duration(longest * record.period)} while the error moves"
