"""Why a record does not come back: each likely cause is tested for by mending it and looking at the null replay."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from auditor.arrays import FloatArray
from auditor.controllers.pid import INTEGRALS, Pid
from auditor.identify import thresholds
from auditor.identify.alignment import lay_out, shift_actuator, skew_words
from auditor.identify.gains import coefficients_of, terms_of
from auditor.identify.limits import at_limit, longest_run, stuck_at_extreme
from auditor.identify.plant import Plant
from auditor.identify.regression import solve
from auditor.identify.residual import (
    controller_residual,
    explained_by_disturbances,
    moves,
    null_replay,
    within,
)
from auditor.identify.signals import Signals, read_signals
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
    found = (
        *_mended(record, controller, plant, null),
        *_retuning(record, controller),
        *_feedforward(record, controller_residual(record, controller).rho),
        *_resting(record),
    )
    return found or (
        "nothing that was tested explains it (skew, limits, integral form, rounding, retuning, gains, feedforward, "
        "manual operation): the actuator obeys another law, or a hand",
    )


@dataclass(frozen=True, slots=True)
class _Mend:
    """One change, what it means in words, and the null replay after it."""

    words: str
    null: float


def _mended(record: Record, controller: Pid, plant: Plant, null: float) -> tuple[str, ...]:
    """Return the changes that mend most; the gains only where no other name for the same law does."""

    def after(words: str, other: Pid, shifted: Record = record) -> _Mend:
        return _Mend(words, max(thresholds.NOTHING_LEFT, null_replay(shifted, other, plant)))

    mends = [after(skew_words(lag), controller, shift_actuator(record, lag)) for lag in (1, -1, 2, -2)]
    mends += [after(words, other) for words, other in (*_limits(record, controller), *_forms(controller))]
    good = [mend for mend in mends if mend.null < thresholds.CAUSE_HALVES * null]
    best = min((mend.null for mend in good), default=math.inf)
    mends = [after(words, other) for words, other in _gains(record, controller)]
    good += [mend for mend in mends if mend.null < thresholds.CAUSE_HALVES * min(null, best)]
    best = min((mend.null for mend in good), default=math.inf)
    kept = [mend for mend in good if mend.null <= 2.0 * best]
    return tuple(mend.words for mend in sorted(kept, key=lambda mend: mend.null))


def _limits(record: Record, controller: Pid) -> Iterator[tuple[str, Pid]]:
    """Limits inside the record's own range, or an actuator that stops short of them."""
    inside = record.u[record.in_span]
    low, high = float(np.nanmin(inside)), float(np.nanmax(inside))
    stuck = stuck_at_extreme(record)
    stops_high = bool(np.any(stuck & (record.u == high))) or high > controller.high
    stops_low = bool(np.any(stuck & (record.u == low))) or low < controller.low
    other = replace(controller, low=low if stops_low else controller.low, high=high if stops_high else controller.high)
    if (other.low, other.high) != (controller.low, controller.high):
        stated = f"{number(controller.low)} and {number(controller.high)}"
        yield (
            f"wrong limits: the actuator moves between {number(low)} and {number(high)}, the limits are {stated}",
            other,
        )


def _forms(controller: Pid) -> Iterator[tuple[str, Pid]]:
    for form in INTEGRALS:
        if form != controller.integral:
            words = f"wrong integral form: '{form}' returns the record better than '{controller.integral}'"
            yield words, replace(controller, integral=form)


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
        clipped = ((max(span.start, start), min(span.stop, stop)) for span in record.spans)
        yield replace(record, spans=tuple(Span(a, b) for a, b in clipped if b - a > 1))


def _gains(record: Record, controller: Pid) -> Iterator[tuple[str, Pid]]:
    """Take the gains that the record itself shows."""
    fitted = _fitted(record, controller)
    if fitted is None or fitted[0] == 0.0:
        return
    time = float(fitted[0] / fitted[1]) if len(fitted) > 1 and fitted[1] != 0 else math.inf
    other = replace(controller, gain=float(fitted[0]), integral_time=time, integral="backward")
    own = coefficients_of(controller, record.period)
    given = replace(controller, gain=float(own[0]))
    yield (
        f"wrong gains: the record shows {_in_words(other)} (backward form), the controller has {_in_words(given)}",
        other,
    )


def _in_words(controller: Pid) -> str:
    time = duration(controller.integral_time) if math.isfinite(controller.integral_time) else "none"
    return f"gain {number(controller.gain)} and integral time {time}"


def _feedforward(record: Record, rho: FloatArray) -> Iterator[str]:
    share = explained_by_disturbances(rho, record)
    if share >= thresholds.FEEDFORWARD_SHARE:
        yield f"feedforward: declared disturbances explain {percent(share)} of what the controller leaves unexplained"


def _resting(record: Record) -> Iterator[str]:
    """An actuator away from its limits that rests while the error moves: rounded, compressed, or in a hand."""
    usable = within(record) & ~at_limit(record)
    resting = (moves(record.u) == 0) & usable
    share = float(np.mean((resting & (moves(record.e) != 0))[usable])) if usable.any() else 0.0
    longest = longest_run(resting)
    if record.u_quantum is not None:
        if share >= _RESTING:
            yield f"the actuator is rounded to {number(record.u_quantum)}: it rests on {percent(share)} of the samples"
    elif share >= _RESTING:
        yield f"the actuator looks compressed by its archive: it rests on {percent(share)} of the samples"
    elif longest >= _MANUAL:
        yield f"manual operation: the actuator rests for {duration(longest * record.period)} while the error moves"
